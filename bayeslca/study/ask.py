"""A hypothesis or a quantity, asked of the saved fit of a finished run."""

from __future__ import annotations

import textwrap
from pathlib import Path

from bayeslca.model.resolve import resolve
from bayeslca.model.resolved import ResolvedRelations
from bayeslca.posterior.posterior import Posterior
from bayeslca.study.results import open_results

WIDTH = 79
NOT_TRUSTED = "The sampling it rests on is not to be trusted: see the report."


def ask(folder: Path, *texts: str) -> str:
    """Answer statements in sentences; several hypotheses are each tested by themselves.

    Raises
    ------
    BayesLCAError
        When the results cannot be opened, or a statement cannot be used.
    """
    posterior = Posterior.load(open_results(folder).main_fit)
    answers = [
        textwrap.fill(
            _answer(posterior, text), WIDTH, break_long_words=False, break_on_hyphens=False
        )
        for text in texts
    ]
    if not posterior.diagnostics().trustworthy:
        answers.append(NOT_TRUSTED)
    return "\n".join(answers)


def _answer(posterior: Posterior, text: str) -> str:
    if isinstance(resolve(text, posterior.model.vocabulary), ResolvedRelations):
        return repr(posterior.test(text))
    return repr(posterior.quantity(text))
