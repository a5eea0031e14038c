"""Did the sampling find what there is: convergence, modes and their weights."""
