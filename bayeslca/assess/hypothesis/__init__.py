"""Hypotheses and their rivals, weighed by Bayes factors."""
