"""Contiguous chunks of a curve."""
