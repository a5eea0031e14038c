"""Examples in error messages, said with the names of the study at hand."""

from __future__ import annotations

import re

from bayeslca.exceptions import StatementError
from bayeslca.model.statements.notation import quoted
from bayeslca.model.statements.vocabulary import Vocabulary


def with_own_names(error: StatementError, vocabulary: Vocabulary) -> StatementError:
    """Return the error with the examples of its remedy said in the study's own names.

    The notation's messages know no study: their examples speak of ``fees=yes`` and ``managed``.
    A name that the study has itself stays as it is.

    Parameters
    ----------
    error : StatementError
    vocabulary : Vocabulary
    """
    own = {**_answers(vocabulary), **_classes(vocabulary), **_groups(vocabulary)}
    pattern = re.compile("|".join(rf"(?<!\w){re.escape(name)}(?!\w)" for name in own) or "(?!)")
    remedy = pattern.sub(lambda found: own[found.group()], error.remedy)
    return StatementError(
        error.problem, statement=error.statement, position=error.position, remedy=remedy
    )


def _answers(vocabulary: Vocabulary) -> dict[str, str]:
    items = vocabulary.items
    names = [item.name for item in items]
    own = [f"{quoted(item.name)}={quoted(item.yes or item.categories[-1])}" for item in items]
    second = own[1 % len(own)]
    said = {
        "fees": own[0],
        "accounts": second,
        "'pays fees'": f"'{names[0]}'={own[0].split('=')[-1]}",
    }
    return {f"{name}=yes": answer for name, answer in said.items() if name.strip("'") not in names}


def _classes(vocabulary: Vocabulary) -> dict[str, str]:
    own = [quoted(name) for name in vocabulary.classes]
    if vocabulary.exploratory or {"managed", "lapsed"} & set(vocabulary.classes):
        return {}
    return {"managed": own[0], "lapsed": own[-1]}


def _groups(vocabulary: Vocabulary) -> dict[str, str]:
    groups = vocabulary.groups
    if groups is None or groups.name == "district":
        return {}
    return {"district=north": f"{quoted(groups.name)}={quoted(groups.levels[0])}"}
