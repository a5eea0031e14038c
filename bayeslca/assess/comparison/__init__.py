"""Models beside each other: predictive accuracy, ties, weights."""
