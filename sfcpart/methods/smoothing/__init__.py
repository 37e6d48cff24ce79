"""Smoothing of any partition, written once over ranks that hold slices of the graph."""
