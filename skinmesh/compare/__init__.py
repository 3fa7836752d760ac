"""What changed between two built meshes."""
