"""From a file on disk to a `Mesh`, and per-cell values from files."""
