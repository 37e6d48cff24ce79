"""Meshes: the value, its geometry, and what can be wrong with it."""
