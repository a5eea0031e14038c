"""Progress of a whole run."""

from __future__ import annotations

import math

import pytest

from bayeslca.assess.comparison.compare import FitProgress
from bayeslca.sampling.progress import Progress
from bayeslca.study.progress import JobProgress, job_progress


def half_way() -> Progress:
    return Progress(
        sweeps=500, planned=1000, ess=math.nan, r_hat=math.nan, seconds=1.0, seconds_left=math.nan
    )


def test_the_bar_runs_over_all_fits() -> None:
    told: list[tuple[str, float, str]] = []
    progress = JobProgress(lambda *said: told.append(said), fits=4)
    progress.of_model("the study's model")(half_way())
    progress.finished(1)
    progress.finished(1)  # one fit was kept from the run before
    progress.of_comparison(FitProgress(1, fit=1, fits=2, sampling=half_way(), share=0.25))
    progress.of_comparison(
        FitProgress(3, fit=2, fits=2, sampling=half_way(), share=0.75, seconds_left=7.2)
    )
    progress.of_comparison(FitProgress(3, fit=2, fits=2, weighing=True, share=0.9))
    progress.say("Writing the report")
    assert [what for what, _, _ in told] == [
        "Fit 1 of 4, the study's model",
        "Fit 3 of 4, 1 class",
        "Fit 4 of 4, 3 classes",
        "Weighing the evidence",
        "Writing the report",
    ]
    assert [share for _, share, _ in told] == pytest.approx([0.125, 0.625, 0.875, 0.95, 1.0])
    assert told[0][2] == "500 sweeps"
    assert told[2][2] == "500 sweeps, about 7 s left"


def test_nothing_is_shown_where_there_is_no_terminal(capsys) -> None:
    with job_progress(2, quiet=False) as progress:
        progress.of_model("the study's model")(half_way())
        progress.say("Writing the report")
    said = capsys.readouterr()
    assert said.out + said.err == ""
