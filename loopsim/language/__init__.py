"""Units, expressions, dimensions, derivatives."""
