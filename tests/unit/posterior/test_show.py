"""How a posterior shows itself."""

from __future__ import annotations

import dataclasses
from types import SimpleNamespace

import pytest

from bayeslca.posterior.posterior import Posterior


def with_verdict(posterior: Posterior, verdict: str) -> Posterior:
    shown = dataclasses.replace(posterior)
    shown.__dict__["_diagnostics"] = SimpleNamespace(verdict=verdict)
    return shown


def test_text_has_classes_prevalences_and_the_verdict(posterior: Posterior) -> None:
    verdict = "The chains agree: R-hat up to 1.004, effective sample size from 1,020. " * 2
    text = repr(with_verdict(posterior, verdict))
    lines = text.splitlines()
    assert max(map(len, lines)) <= 80
    assert lines[0] == "Posterior of a latent class model: 2 classes, 4 items, 90 cases"
    assert "seed 11" in lines[1]
    row = posterior.prevalence().iloc[0]
    assert f"{row['median']:.1%} ({row['lower']:.1%} to {row['upper']:.1%})" in text
    assert f"{row['cases']:.0f} ({row['cases_lower']:.0f} to {row['cases_upper']:.0f})" in text
    assert "median (95 % interval)" in text
    assert "The chains agree" in text


def test_the_verdict_is_that_of_the_diagnostics(posterior: Posterior) -> None:
    words = " ".join(repr(posterior).split())
    assert " ".join(posterior.diagnostics().verdict.split()) in words


def test_long_names_and_groups_stay_within_80_columns(grouped: Posterior) -> None:
    long = "managed with great care by an elected committee of seven people"
    model = dataclasses.replace(
        grouped.model,
        classes=(long, "lapsed"),
        statements=(f"'{long}' is where P(accounts=yes) is highest",),
    )
    shown = with_verdict(dataclasses.replace(grouped, model=model), "Fine. " * 40)
    assert max(map(len, repr(shown).splitlines())) <= 80
    assert "lapsed, south" in repr(shown)


def test_html_is_escaped(grouped: Posterior) -> None:
    name = "<script>alert(1)</script>"
    model = dataclasses.replace(
        grouped.model,
        classes=(name, "lapsed"),
        statements=(f"'{name}' is where P(accounts=yes) is highest",),
    )
    shown = with_verdict(dataclasses.replace(grouped, model=model), "R-hat < 1.01 & fine")
    html = shown._repr_html_()
    assert "<script>" not in html
    assert "&lt;script&gt;alert(1)&lt;/script&gt;, overall" in html
    assert "R-hat &lt; 1.01 &amp; fine" in html


@pytest.mark.parametrize("name", ["posterior", "single"])
def test_a_notebook_shows_a_table(name: str, request: pytest.FixtureRequest) -> None:
    shown = with_verdict(request.getfixturevalue(name), "Fine.")
    html = shown._repr_html_()
    assert html.count("<tr>") == 1 + shown.model.n_classes
