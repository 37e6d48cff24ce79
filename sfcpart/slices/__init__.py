"""What one rank holds of a mesh that lies on many: slices of the cells, and rows on their way."""
