"""Compiled arithmetic on float64 arrays; knows numpy, numba and math, reports by status, never raises."""
