"""Ways to split a mesh: one signature, one registry."""
