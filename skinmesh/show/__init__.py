"""Pictures of a built mesh."""
