"""What is assumed: classes, priors, statements, and the compiled table."""
