"""What a study file asks for and cannot get: refused before anything is sampled."""

from __future__ import annotations

from typing import TYPE_CHECKING

from bayeslca.assess.left_out.folds import refuse_folds
from bayeslca.exceptions import ModelError, StudyError

if TYPE_CHECKING:
    from bayeslca.study.load import Study


def refuse_asked_in_vain(study: Study) -> None:
    """Refuse keys that other keys leave without effect, and folds that cases cannot fill.

    Raises
    ------
    StudyError
    """
    counts, priors = study.said.class_count, study.said.priors
    asked = {
        "also_under": bool(counts.also_under),
        "exact": counts.exact is True,
        "folds": counts.folds > 0,
    }
    for key, wanted in asked.items():
        if wanted and not counts.compare:
            msg = (
                f"{study.path.name}, [class_count] {key}: it is of the numbers of classes that are "
                "compared, and compare is empty. List some, or leave it out."
            )
            raise StudyError(msg)
    likelihood = study.said.maximum_likelihood
    one_fewer = any(n - 1 in counts.compare for n in counts.compare)
    if likelihood is not None and likelihood.bootstrap and not one_fewer:
        msg = (
            f"{study.path.name}, [maximum_likelihood] bootstrap: it tests one class fewer, and "
            "[class_count] compare holds no two numbers in a row. List some, or leave it out."
        )
        raise StudyError(msg)
    if priors.refit and not priors.sensitivity:
        msg = (
            f"{study.path.name}, [priors] refit: it names other priors to fit under, and "
            "sensitivity = false asks for none. Leave out one of the two."
        )
        raise StudyError(msg)
    for key, names in (
        ("[class_count] also_under", counts.also_under),
        ("[priors] refit", priors.refit),
    ):
        listed: list[str] = list(names or [])
        twice = [name for name in listed if listed.count(name) > 1]
        if twice:
            msg = f"{study.path.name}, {key}: names {twice[0]!r} more than once. Name it once."
            raise StudyError(msg)
    if counts.folds:
        try:
            refuse_folds(study.responses.units, counts.folds)
        except ModelError as error:
            msg = f"{study.path.name}, [class_count] folds: {error}"
            raise StudyError(msg) from None
