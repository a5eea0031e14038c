"""The evidence (marginal likelihood) of a model, with an error that can be trusted."""
