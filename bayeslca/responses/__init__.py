"""What was observed: items, answers, and the units they collapse to."""
