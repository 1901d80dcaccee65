"""One module a schema change, in the order of their numbers."""
