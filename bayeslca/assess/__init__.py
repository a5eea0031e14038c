"""Should it be believed: convergence, information criteria, comparison."""
