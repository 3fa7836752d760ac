"""One module a file format; each registers itself at its foot."""
