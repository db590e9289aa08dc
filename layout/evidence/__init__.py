"""What choosing buys: baselines and comparisons for a chosen layout."""
