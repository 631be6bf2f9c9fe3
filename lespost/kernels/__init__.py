"""Compiled kernels on bare arrays: one level at a time, float32 in, float64 accumulated. No xarray, no I/O, no choices."""
