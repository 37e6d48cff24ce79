"""Measuring a partition, and looking over a mesh."""
