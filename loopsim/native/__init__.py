"""A small compiler: restricted Python to machine code. It knows nothing of plants."""
