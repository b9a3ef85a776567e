"""Benchmarks, each of which prints one line of JSON: `python -m tests.benchmarks.sweep`, `... .proof`."""

from app.kernel_cache import choose_kernel_cache

# Before numba is imported by what is measured.
choose_kernel_cache()
