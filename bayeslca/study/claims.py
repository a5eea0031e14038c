"""The theory of a study: its hypotheses, rivals and quantities, put to the posterior."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import TYPE_CHECKING

from bayeslca.exceptions import BayesLCAError, StudyError
from bayeslca.model.statements.resolve import resolve
from bayeslca.model.statements.resolved import ResolvedQuantity, ResolvedRelations
from bayeslca.report.content import Claim, ReportContent

if TYPE_CHECKING:
    from bayeslca.assess.hypothesis.hypotheses import HypothesisTest
    from bayeslca.assess.hypothesis.rivals import Rivals
    from bayeslca.study.load import Study


def check_theory(study: Study) -> None:
    """Read every hypothesis and quantity before anything is sampled.

    Raises
    ------
    StudyError
        Naming the claim or the quantity, with the place in its statement.
    """
    if study.model is None:
        return
    vocabulary = study.model.vocabulary
    asked = [
        (f"[[hypotheses]] {said.claim!r}", text, ResolvedRelations)
        for said in study.said.hypotheses
        for text in said.statements
    ]
    wanted = [
        (f"[quantities] {name!r}", text, ResolvedQuantity)
        for name, text in study.said.quantities.items()
    ]
    for place, text, kind in [*asked, *wanted]:
        try:
            resolved = resolve(text, vocabulary)
        except BayesLCAError as error:
            msg = f"{study.path.name}, {place}: {error}"
            raise StudyError(msg) from None
        if not isinstance(resolved, kind):
            needs = "a comparison" if kind is ResolvedRelations else "no comparison and no prior"
            msg = f"{study.path.name}, {place}: {text!r} cannot stand here; write {needs}."
            raise StudyError(msg)


def with_theory(study: Study, content: ReportContent, say: Callable[[str], None]) -> ReportContent:
    """Test the study's hypotheses and compute its quantities."""
    from bayeslca.assess.hypothesis.rivals import compare_rivals

    say("Testing the hypotheses")
    posterior = content.posterior
    said, seed = study.said, study.said.sampling.seed
    tests: dict[str, HypothesisTest] = {}
    rivals: dict[str, Rivals] = {}
    for name in dict.fromkeys(one.rivals for one in said.hypotheses if one.rivals):
        members = [one for one in said.hypotheses if one.rivals == name]
        rivals[name] = compare_rivals(
            posterior,
            {one.claim: one.statements for one in members},
            weights={one.claim: one.weight for one in members},
            seed=seed,
        )
        tests |= dict(rivals[name].tests)
    for one in said.hypotheses:
        if not one.rivals:
            tests[one.claim] = posterior.test(*one.statements, seed=seed)
    claims = tuple(Claim(one.claim, tests[one.claim], one.planned) for one in said.hypotheses)
    wanted = posterior.quantities(said.quantities, said.report.interval)
    return replace(
        content, claims=claims, rivals=rivals, quantities=wanted if said.quantities else None
    )
