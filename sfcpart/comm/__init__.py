"""Ranks: one contract, three communicators."""
