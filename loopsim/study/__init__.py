"""Rules, verdicts, metrics and the comparison of strategies."""
