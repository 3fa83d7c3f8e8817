"""Benchmarks, one a part."""
