"""Files from a finished shell mesh. Writers know nothing of geometry."""
