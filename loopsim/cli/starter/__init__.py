"""Files that `loopsim new` copies."""
