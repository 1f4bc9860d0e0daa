"""The validation book: published figures, what the tool computes for them, and the verdict."""
