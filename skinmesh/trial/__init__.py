"""A built mesh in a solver, beside beam theory."""
