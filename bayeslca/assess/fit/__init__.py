"""Does the model reproduce the answers: posterior predictive checks."""
