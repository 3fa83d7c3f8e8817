"""Frozen values that the steps pass to each other: no files, no mathematics beyond properties."""
