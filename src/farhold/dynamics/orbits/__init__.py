"""How reference orbits are found and kept: analytic starts, correctors, and the table in extended precision."""
