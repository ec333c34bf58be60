"""Benchmarks of rayloom: one subject per file, rivals side by side in one run."""
