"""Loops over vertices and edges of a graph with parts."""
