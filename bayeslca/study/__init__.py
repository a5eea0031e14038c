"""A study file, and the whole job done from it."""
