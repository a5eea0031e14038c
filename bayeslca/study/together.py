"""Which cases go together whatever the number of classes: a step of a run."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import TYPE_CHECKING

from bayeslca.exceptions import ModelError
from bayeslca.report.content import ReportContent

if TYPE_CHECKING:
    from bayeslca.study.load import Study


def with_together(
    study: Study, content: ReportContent, say: Callable[[str], None]
) -> ReportContent:
    """Find who is together with whom: averaged over the number of classes where that can be.

    Otherwise by the model that the answer rests on, and the report says why.
    """
    if not study.said.class_count.together or content.comparison is None:
        return content
    say("Which cases go together")
    why_not = ""
    try:
        try:
            average = content.comparison.averaged()
            found = average.co_membership()
            why_not = average.caveat
        except ModelError as error:
            # The section on the number of classes says why; here it is enough to say that.
            none = content.comparison.table["probability"].isna().all()
            why = "no number has a probability that is reliable" if none else str(error)
            why_not = f"The number of classes could not be averaged over: {why}"
            found = content.posterior.co_membership()
    except ModelError as error:
        return replace(content, together_why_not=str(error))
    return replace(content, together=found, together_why_not=why_not)
