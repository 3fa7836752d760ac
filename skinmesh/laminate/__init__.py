"""Materials, plies and stacks, and what classical lamination theory says of them."""
