"""Commands; one short function each."""
