"""Solvers of the assignment problem; each returns a pairing, none is trusted: see ``proof``."""
