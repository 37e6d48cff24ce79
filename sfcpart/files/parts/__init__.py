"""From a partition to the folder that a solver loads, and back to one part."""
