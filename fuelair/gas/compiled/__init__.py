"""Gas engines compiled with numba: the one place that imports it. Nothing is compiled before it is first called."""
