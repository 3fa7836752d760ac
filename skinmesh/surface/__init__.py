"""The surface of the blade: profiles, unit shapes, and the loft through them."""
