"""Section properties of the blade as a beam, from the exact sections and from the mesh."""
