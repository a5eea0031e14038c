"""Errors of the notation give their examples in the names of the study at hand."""

from __future__ import annotations

import pytest

from bayeslca.exceptions import StatementError
from bayeslca.model.statements.resolve import resolve
from bayeslca.model.statements.vocabulary import Vocabulary
from bayeslca.responses.item import Groups, Item

TESTS = Vocabulary(
    (Item("elisa", ("negative", "positive")), Item("rapid test", ("no", "yes"), yes="yes")),
    ("infected", "free"),
    Groups("herd", ("A", "B")),
)
OWN = Vocabulary((Item("fees", ("no", "yes")),), ("managed", "lapsed"), Groups("district", ("n",)))


@pytest.mark.parametrize(
    ("text", "remedy"),
    [
        ("infected is P(elisa=positive)", "infected is where P(elisa=positive) is highest"),
        ("", "P(elisa=positive | infected) > P(elisa=positive | free)"),
        ("P(elisa=positive | infected, herd A)", "P(elisa=positive | infected, herd=A)"),
        ("3 + 4", "P(elisa=positive | infected)"),
        ("P(elisa two=positive | infected)", "or P('elisa'=positive | infected)"),
    ],
)
def test_the_remedy_speaks_of_the_study(text: str, remedy: str) -> None:
    with pytest.raises(StatementError) as error:
        resolve(text, TESTS)
    assert remedy in error.value.remedy
    assert "fees" not in str(error.value)


def test_names_that_the_study_has_stay_as_they_are() -> None:
    with pytest.raises(StatementError) as error:
        resolve("managed is P(fees=yes)", OWN)
    assert "managed is where P(fees=yes) is highest" in error.value.remedy
