"""Clusters, counts and shapes of management zones: arrays and geometry, no files."""
