"""Reading meshes, writing parts."""
