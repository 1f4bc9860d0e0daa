"""Reports: pure functions from a result to tables and files."""
