"""Numbered classes of groups that share nothing: the diagnostics say that they do not match."""

from __future__ import annotations

import pandas as pd
import pytest

from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.responses.responses import Responses

RULE = "managed is where P(fees=yes) is highest"


@pytest.mark.parametrize(
    ("classes", "statements", "free", "said"),
    [
        (2, (), True, True),
        (2, (), ("fees",), False),
        (2, (), False, False),
        (("managed", "lapsed"), (RULE,), True, False),
    ],
)
def test_it_is_said_where_nothing_matches_classes_across_groups(
    classes: int | tuple[str, ...],
    statements: tuple[str, ...],
    free: bool | tuple[str, ...],
    said: bool,
) -> None:
    rows = [("yes", "yes", "yes"), ("no", "no", "no"), ("yes", "no", "yes")] * 10
    frame = pd.DataFrame(rows, columns=["fees", "meets", "fenced"])
    frame["district"] = ["hill", "lake"] * 15
    responses = Responses.from_frame(frame, items=["fees", "meets", "fenced"], group="district")
    model = LatentClassModel(
        responses.items, classes, statements, groups=responses.groups, free_by_group=free
    )
    posterior = model.sample(
        responses, seed=1, draws=50, ess=10, r_hat=2.0, max_sweeps=700, progress=False
    )
    found = posterior.diagnostics()
    assert ("classes_not_matched" in {finding.kind for finding in found.findings}) is said
    assert ("falling prevalence in each group" in found.verdict) is said
