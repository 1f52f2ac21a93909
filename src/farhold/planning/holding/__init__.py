"""Holding: what it costs to keep a node in its slot."""
