"""Checks of a built mesh, from its files alone."""
