"""Complex samples: weights, clusters and strata."""
