"""Items that look like diagnostic tests, by their answers."""

from __future__ import annotations

from collections.abc import Iterable

from bayeslca.responses.item import Item

TEST_RESULTS = frozenset(
    {"positive", "negative", "pos", "neg", "+", "-", "reactive", "non-reactive", "nonreactive"}
)
"""Answers that make an item look like a diagnostic test."""


def look_like_tests(items: Iterable[Item]) -> bool:
    """Tell whether any of these items has two answers that are a test's results."""
    answers = [{category.strip().casefold() for category in item.categories} for item in items]
    return any(len(found & TEST_RESULTS) > 1 for found in answers)
