"""Many variants of one blade: what is changed, the work on several processes, and the table of results."""
