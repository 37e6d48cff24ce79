"""Loops over cells and their faces."""
