"""Outcomes that follow from class: jointly, by a cut, and in three steps."""
