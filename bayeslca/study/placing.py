"""Who belongs where, by the study's rule: the step of a run that places cases in classes."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import TYPE_CHECKING

from bayeslca.exceptions import ModelError, StudyError
from bayeslca.relate.placing import PlacingRule
from bayeslca.report.content import ReportContent

if TYPE_CHECKING:
    from bayeslca.study.load import Study


def placing_rule(study: Study) -> PlacingRule | None:
    """Return the study's rule; None when it has none."""
    said = study.said.assignment
    return None if said is None else PlacingRule(said.at_most, said.costs)


def check_placing(study: Study) -> None:
    """Refuse costs of classes that the model does not have, before anything is sampled.

    Raises
    ------
    StudyError
    """
    rule = placing_rule(study)
    if rule is None:
        return
    if study.model is None:
        if rule.costs:
            msg = (
                f"{study.path.name}, [assignment] costs: they are of classes, and [model] classes "
                "is left out; name the classes."
            )
            raise StudyError(msg)
        return
    try:
        highest = float(rule.matrix(study.model.class_names).max())
    except ModelError as error:
        msg = f"{study.path.name}, [assignment]: {error}"
        raise StudyError(msg) from None
    if study.model.n_classes > 1 and rule.at_most > highest:
        msg = (
            f"{study.path.name}, [assignment] at_most: {rule.at_most:g} is above the highest cost, "
            f"{highest:g}, so that no case would be left unassigned. Give at most that; with all "
            "costs 1, 0.2 asks for a probability of 80 %."
        )
        raise StudyError(msg)


def with_placing(study: Study, content: ReportContent, say: Callable[[str], None]) -> ReportContent:
    """Place the cases, and draw classes, as far as the study asks for it."""
    from bayeslca.relate.placing import place_cases
    from bayeslca.relate.plausible_values import plausible_values

    said, rule = study.said.assignment, placing_rule(study)
    if said is None or rule is None:
        return content
    say("Placing the cases")
    drawn = None
    if said.plausible_values:
        drawn = plausible_values(
            content.posterior,
            number=said.plausible_values,
            seed=study.said.sampling.seed,
            given=content.predictors if _draws(content) else None,
        )
    return replace(
        content,
        placing_rule=rule,
        placed=place_cases(content.posterior, at_most=rule.at_most, costs=rule.costs),
        plausible_values=drawn,
    )


def _draws(content: ReportContent) -> bool:
    """Whether the study's regression of class has draws to draw classes from."""
    return content.predictors is not None and bool(content.predictors.draws)
