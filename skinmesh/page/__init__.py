"""One page to look at a built blade: what it shows is gathered here, the drawing is done by the browser."""
