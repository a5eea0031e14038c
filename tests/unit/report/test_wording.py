"""Numbers in words, checked against how a paper would print them (common practice, no source)."""

from __future__ import annotations

import math

import pytest

from bayeslca.report import wording


@pytest.mark.parametrize(
    ("share", "text"),
    [
        (0.41, "41 %"),
        (0.005, "0.5 %"),
        (0.996, "99.6 %"),
        (0.9902, "99 %"),
        (0.0098, "1 %"),
        (0.9999, "above 99.9 %"),
        (0.0001, "below 0.1 %"),
        (0.0, "0 %"),
        (1.0, "100 %"),
        (math.nan, "–"),
    ],
)
def test_percent(share: float, text: str) -> None:
    assert wording.percent(share) == text


def test_interval_is_the_one_of_the_design() -> None:
    assert wording.percent_interval(0.41, 0.30, 0.52) == "41 % (30 to 52)"
    assert wording.about_of(0.41, 118) == "about 48 of 118"


def test_ends_of_an_interval_may_reach_0_and_100() -> None:
    assert wording.percent_interval(0.991, 0.94, 0.9999) == "99.1 % (94 to 100)"
    assert wording.percent_interval(0.02, 0.00001, 0.08) == "2 % (0 to 8)"


@pytest.mark.parametrize(
    ("number", "text"), [(0, "0 cases"), (1, "1 case"), (2, "2 cases"), (1200, "1,200 cases")]
)
def test_counted(number: int, text: str) -> None:
    assert wording.counted(number, "case") == text


def test_small_counts_are_words() -> None:
    assert wording.counted_in_words(1, "class", "classes") == "one class"
    assert wording.counted_in_words(3, "class", "classes") == "three classes"
    assert wording.counted_in_words(12, "class", "classes") == "12 classes"


def test_minus_is_a_minus_sign_and_zero_has_none() -> None:
    assert wording.decimal(-1.25, 1) == "−1.2"
    assert wording.decimal(-0.01, 1) == "0.0"


@pytest.mark.parametrize(
    ("parts", "text"),
    [([], ""), (["a"], "a"), (["a", "b"], "a and b"), (["a", "b", "c"], "a, b and c")],
)
def test_listed(parts: list[str], text: str) -> None:
    assert wording.listed(parts) == text


def test_long_lists_are_cut_and_counted() -> None:
    assert wording.listed_up_to(list("abcde"), 3) == "a, b, c and 2 more"


def test_numbered_classes_are_called_classes() -> None:
    assert wording.called("1") == "class 1"
    assert wording.called("managed") == "managed"


def test_sentence_ends_once() -> None:
    assert wording.sentence("what now?") == "What now?"
    assert wording.sentence("so it is") == "So it is."
    assert wording.sentence("") == ""


def test_significant_digits() -> None:
    assert wording.significant(0.00123) == "0.0012"
    assert wording.significant(1234.5) == "1,234"
    assert wording.significant(0.0) == "0"
    assert wording.significant(-3e-12) == "0"


def test_duration() -> None:
    assert wording.duration(0.81) == "0.81 seconds"
    assert wording.duration(60 * 3.2) == "3 minutes"


@pytest.mark.parametrize(
    ("probability", "text"),
    [(1.0, "above 99.9 %"), (0.0, "below 0.1 %"), (0.974, "97 %"), (math.nan, "–")],
)
def test_a_probability_from_draws_is_never_certain(probability: float, text: str) -> None:
    assert wording.chance(probability) == text
