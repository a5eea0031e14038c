"""What is told while chains run."""

from __future__ import annotations

import math

import pytest

from bayeslca.sampling import progress
from bayeslca.sampling.progress import Meter, Progress, in_words, shown
from bayeslca.sampling.stopping import Convergence, StoppingRule


def test_the_meter_counts_and_estimates_what_is_left():
    told: list[Progress] = []
    meter = Meter(told.append, StoppingRule(1000, 1.01))
    meter.plan(4000)
    meter.add(1000)
    meter.add(1000)
    meter.look()
    assert told[-1].sweeps == 2000
    assert told[-1].planned == 4000
    assert math.isnan(told[-1].ess)
    assert math.isnan(told[-1].seconds_left)
    meter.judged(Convergence(250.0, "x", 1.03, "y"))
    assert told[-1].ess == 250.0
    # a quarter of what is asked for: three times as long again
    assert told[-1].seconds_left == pytest.approx(3 * told[-1].seconds, rel=0.01)
    meter.judged(Convergence(1200.0, "x", 1.0, "y"))
    assert told[-1].seconds_left == 0.0


def test_no_more_is_left_than_the_limit_allows():
    told: list[Progress] = []
    meter = Meter(told.append, StoppingRule(1000, 1.01), most=6000)
    meter.add(3000)
    meter.judged(Convergence(1.0, "x", 1.5, "y"))
    assert told[-1].seconds_left == pytest.approx(told[-1].seconds, rel=0.01)


def test_nothing_is_shown_without_a_terminal(capsys):
    for wish in (True, False):
        with shown(wish) as show:
            show(Progress(1, 2, 3.0, 1.0, 1.0, 1.0))
    captured = capsys.readouterr()
    assert captured.out == ""
    assert captured.err == ""


def test_a_bar_is_shown_on_a_terminal(monkeypatch, capsys):
    monkeypatch.setattr(progress.sys.stderr, "isatty", lambda: True, raising=False)
    with shown(True) as show:
        show(Progress(1500, 3000, 321.0, 1.02, 1.0, 2.0))
    assert "321" in capsys.readouterr().err


def test_a_callback_is_used_as_it_is():
    told = []
    with shown(told.append) as show:
        show(Progress(1, 2, 3.0, 1.0, 1.0, 1.0))
    assert len(told) == 1


def test_figures_in_words():
    full = Progress(120_000, 200_000, 812.4, 1.0123, 3.0, 4.6)
    assert in_words(full) == "120,000 sweeps, ESS 812, R-hat 1.012, about 5 s left"
    nan = math.nan
    assert in_words(Progress(500, 1000, nan, nan, 0.1, nan)) == "500 sweeps"
    assert in_words(Progress(500, 1000, math.inf, 1.0, 0.1, 0.0)) == (
        "500 sweeps, R-hat 1.000, about 0 s left"
    )
