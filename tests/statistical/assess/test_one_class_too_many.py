"""One class too many on published tables: the chains still agree after relabelling, in seconds.

Numbers of classes as the sources of the tables have them (tests/references/SOURCES.md), plus one.
"""

from __future__ import annotations

import csv
import time
from functools import cache
from pathlib import Path

import pandas as pd
import pytest

from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses

SEED = 20261208
SECONDS = 20.0
"""Of processor time; some 1 to 3 on an idle machine, without compiling."""
REFERENCES = Path(__file__).parents[2] / "references"
TABLES = {
    "stouffer_toby_1951": 3,
    "carcinoma_raters_1977": 4,
    "academic_cheating_dayton_1998": 3,
}


def published(name: str) -> Responses:
    with (REFERENCES / f"{name}.csv").open(encoding="utf-8") as file:
        head, *body = csv.reader(file)
    frame = pd.DataFrame([row for row in body if int(row[-1]) > 0], columns=head)
    frame[head[-1]] = frame[head[-1]].astype(int)
    return Responses.from_frame(frame, items=head[:-1], counts=head[-1])


@cache
def fitted(name: str) -> tuple[Posterior, float]:
    responses = published(name)
    model = LatentClassModel(responses.items, TABLES[name])
    begin = time.process_time()
    posterior = model.sample(responses, seed=SEED, progress=False)
    return posterior, time.process_time() - begin


@pytest.mark.parametrize("name", TABLES)
def test_reported_quantities_converge(name: str) -> None:
    posterior, seconds = fitted(name)
    diagnostics = posterior.diagnostics()
    assert diagnostics.trustworthy, diagnostics.verdict
    # All but quantities of classes that hold no case, or are one class under two names.
    rows = diagnostics.table[diagnostics.table["note"] == ""]
    assert len(rows) > 10
    assert rows["r_hat"].max() <= 1.01
    assert rows[["ess_bulk", "ess_tail"]].min().min() >= 1000
    assert not posterior.draws.limit_reached
    assert seconds < SECONDS


def test_the_log_likelihood_alone_would_stop_too_early() -> None:
    # The rule looks at what is reported, whose effective draws are far fewer.
    posterior, _ = fitted("stouffer_toby_1951")
    table = posterior.diagnostics().table
    every = table.set_index("quantity")["ess_bulk"]
    others = every.drop("log likelihood").min()
    assert every["log likelihood"] > 1.5 * others
