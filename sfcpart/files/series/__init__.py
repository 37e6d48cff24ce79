"""Series: weights that change on one mesh, or meshes that follow from each other."""
