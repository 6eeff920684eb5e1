"""Blocks and wires made into one flat, ordered model; its operating point and its audit."""
