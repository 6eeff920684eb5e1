"""Text files with line and column, read into blocks, plants, strategies and scenarios."""
