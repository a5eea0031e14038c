"""Limits: what is said of independence fits the model, and a place is counted once."""

from __future__ import annotations

from types import SimpleNamespace

import pytest

from bayeslca.report.sections.limits import _independence as independence


@pytest.mark.parametrize(
    ("sets", "said"),
    [
        ((), "Independence within a class was assumed,"),
        (((0, 1),), "Independence within a class of items outside the sets that may go together"),
        (((0, 1, 2),), "Items may go together within a class,"),
    ],
)
def test_independence_is_said_only_of_items_outside_sets(
    sets: tuple[tuple[int, ...], ...], said: str
) -> None:
    facts = SimpleNamespace(
        content=SimpleNamespace(checks=SimpleNamespace(findings=())),
        posterior=SimpleNamespace(
            model=SimpleNamespace(item_sets=[SimpleNamespace(items=items) for items in sets]),
            table=SimpleNamespace(n_items=3),
        ),
    )
    term, _ = independence(facts)  # type: ignore[arg-type]
    assert term.startswith(said)
