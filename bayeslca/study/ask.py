"""A hypothesis or a quantity, asked of the saved fit of a finished run."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping
from dataclasses import fields
from pathlib import Path
from typing import Any

from bayeslca.model.statements.resolve import resolve
from bayeslca.model.statements.resolved import ResolvedRelations
from bayeslca.posterior.posterior import Posterior
from bayeslca.posterior.quantities import Quantity
from bayeslca.study.results import open_results

WIDTH = 79
UNWEIGHTED = "Unweighted: this is of the cases as they are, not of the population."
NOT_TRUSTED = "The sampling it rests on is not to be trusted: see the report."


def ask(folder: Path, *texts: str) -> str:
    """Answer statements in sentences; several hypotheses are each tested by themselves.

    Raises
    ------
    BayesLCAError
        When the results cannot be opened, or a statement cannot be used.
    """
    results = open_results(folder)
    posterior = Posterior.load(results.main_fit)
    seed = int(results.record.get("seed") or 0)  # the study's own, so that page and answer agree
    answers = [_answer(posterior, text, seed) for text in texts]
    if posterior.responses.design is not None:
        answers.append(_wrapped(UNWEIGHTED))
    if not posterior.diagnostics().trustworthy:
        answers.append(NOT_TRUSTED)
    return "\n".join(answers)


def _answer(posterior: Posterior, text: str, seed: int = 0) -> str:
    """Answer one statement; a quantity of several groups or classes has a sentence for each."""
    if isinstance(resolve(text, posterior.model.vocabulary), ResolvedRelations):
        return _wrapped(repr(posterior.test(text, seed=seed)))
    rows = posterior.quantities([text]).to_dict("records")
    if len(rows) == 1:
        return _wrapped(repr(posterior.quantity(text)))
    known = {field.name for field in fields(Quantity)}
    return "\n".join(
        _wrapped(f"{_place(row)}: {Quantity(**{k: v for k, v in row.items() if k in known})!r}")
        for row in rows
    )


def _place(row: Mapping[Any, Any]) -> str:
    """Return the group, the class, or both that a row is about."""
    return ", ".join(row[key] for key in ("group", "latent_class") if row.get(key))


def _wrapped(text: str) -> str:
    return textwrap.fill(text, WIDTH, break_long_words=False, break_on_hyphens=False)
