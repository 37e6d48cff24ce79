"""What one rank holds of a mesh that lies on many: slices of the cells, and rows on their way.

Two ways to lie on ranks, and one to go from one to the other:

- by cells: rank r holds cells `rank_first[r]` to `rank_first[r + 1] - 1` in file order
  (`MeshSlice`), and whatever has a row a cell: fields, weights, `cell_part`, the cell graph;
- by parts: rank r makes and writes what belongs to parts `block_bounds(n_parts, size)[r]` to
  `block_bounds(n_parts, size)[r + 1] - 1`: exchange lists and local meshes. There cells go by
  their global number (`cell_gid`), parts by their number in the whole partition, and offsets start
  at 0 for the rank's first part. With one rank this is the list of all parts.

Arrays of one row a part or a rank may be whole on every rank; nothing of one row a cell may.
"""
