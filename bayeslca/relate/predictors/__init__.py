"""Predictors of class: jointly, by a cut, and in three steps."""
