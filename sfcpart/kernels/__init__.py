"""Compiled loops: arrays and scalars in, arrays out; no class of ours is seen here."""
