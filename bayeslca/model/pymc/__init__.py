"""The model in PyMC."""
