"""Studies: many cases instead of one."""
