"""Block-diagram loop simulator with first-principles blocks."""
