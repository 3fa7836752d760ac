"""Layered shell meshes of rotor blades from a station table and a ply schedule."""

__version__ = "0.1.0"
