"""The developed skin: rows, seams, regions and the cover of plies."""
