"""Block-diagram loop simulator with first-principles blocks."""

__version__ = "0.1.0"
