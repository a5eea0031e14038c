"""The section on maximum likelihood: criteria in words, tests taken in turn."""

from __future__ import annotations

from types import SimpleNamespace

import pytest

from bayeslca.report.sections.likelihood import _with_p as with_p
from bayeslca.report.sections.likelihood import tests_in_words as in_words


def count_test(smaller: int, p: float) -> SimpleNamespace:
    of = lambda n: SimpleNamespace(model=SimpleNamespace(n_classes=n), n_cases=90)  # noqa: E731
    return SimpleNamespace(smaller=of(smaller), larger=of(smaller + 1), p_value=p)


@pytest.mark.parametrize(
    ("p_values", "said"),
    [
        ([0.01, 0.02, 0.3, 0.01], "the first test with p of 0.05 or more is of 3 classes"),
        ([0.4], "is of 1 class: by these tests it is enough"),
        ([0.01, 0.049], "Every test up to 3 classes has p below 0.05"),
    ],
)
def test_the_first_test_that_does_not_reject_is_named(p_values: list[float], said: str) -> None:
    tests = tuple(count_test(n + 1, p) for n, p in enumerate(p_values))
    assert said in in_words(tests)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("p", "shown"),
    [(1e-12, "137.3 (p below 0.001)"), (0.7, "137.3 (p = 0.70)"), (float("nan"), "137.3")],
)
def test_a_p_next_to_nothing_is_not_printed_as_zeros(p: float, shown: str) -> None:
    assert with_p(137.3, p) == shown
