"""Studies: the same functions over many cases. `batch.Study` is their core."""
