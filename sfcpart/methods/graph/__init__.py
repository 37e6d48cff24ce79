"""Splitting and refining on the cell graph, or any graph."""
