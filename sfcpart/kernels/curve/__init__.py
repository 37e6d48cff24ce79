"""Loops over keys and places on a curve."""
