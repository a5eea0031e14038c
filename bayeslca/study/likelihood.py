"""Maximum likelihood beside the posterior: the step of a run for readers who ask for it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import TYPE_CHECKING

from bayeslca.report.content import ReportContent

if TYPE_CHECKING:
    from bayeslca.assess.likelihood.criteria_beside import CriteriaBeside
    from bayeslca.assess.likelihood.likelihood_ratio import LikelihoodRatioTest
    from bayeslca.study.load import Study

Say = Callable[[str], None]


def with_maximum_likelihood(study: Study, content: ReportContent, say: Say) -> ReportContent:
    """Fit every compared model by maximum likelihood, and test numbers of classes.

    Raises
    ------
    ModelError
        When no model of the study can be fitted so.
    """
    from bayeslca.assess.comparison.compare import compare
    from bayeslca.assess.likelihood.criteria_beside import criteria_beside

    said, seed = study.said.maximum_likelihood, study.said.sampling.seed
    if said is None:
        return content
    comparison = content.comparison or compare({"this study": content.posterior}, progress=False)
    criteria = criteria_beside(
        comparison,
        starting_points=said.starting_points,
        seed=seed,
        progress=lambda name: say(f"Maximum likelihood, {_row(name)}"),
    )
    return replace(
        content,
        criteria=criteria,
        one_class_fewer=_tests(criteria, said.bootstrap, seed, say) if said.bootstrap else (),
    )


def _tests(
    criteria: CriteriaBeside, samples: int, seed: int, say: Say
) -> tuple[LikelihoodRatioTest, ...]:
    """Test each number of classes against one fewer, where both were fitted.

    Ctrl-C ends a test with the tables that are done, and leaves out the tests after it.
    """
    from bayeslca.assess.likelihood.likelihood_ratio import likelihood_ratio_test

    found: list[LikelihoodRatioTest] = []
    counts = sorted(name for name in criteria.fits if isinstance(name, int))
    for n in counts:
        if n - 1 not in counts:
            continue

        def tell(done: int, planned: int, seconds: float, n: int = n) -> None:
            left = f", about {seconds * (planned / done - 1):.0f} s left" if done else ""
            say(f"Testing {n - 1} v {n} classes: table {done:,} of {planned:,}{left}")

        test = likelihood_ratio_test(
            criteria.fits[n - 1], criteria.fits[n], samples=samples, seed=seed, progress=tell
        )
        found.append(test)
        if test.stopped:
            break
    return tuple(found)


def _row(name: object) -> str:
    if isinstance(name, int):
        return "1 class" if name == 1 else f"{name} classes"
    return str(name)
