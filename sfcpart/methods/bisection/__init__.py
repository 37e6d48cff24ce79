"""Halving again and again: by coordinates, inertia, or the spectrum of the graph."""
