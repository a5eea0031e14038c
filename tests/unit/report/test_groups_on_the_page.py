"""The page where response probabilities differ by group."""

from __future__ import annotations

from types import SimpleNamespace

from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.report.facts import Facts
from bayeslca.report.sections.classes import profile_figures
from bayeslca.report.sections.portraits import portrait
from bayeslca.responses.item import Groups, Item


def test_each_group_has_a_figure_where_groups_answer_differently(made: SimpleNamespace) -> None:
    items = tuple(Item(name, ("no", "yes"), yes="yes") for name in ("fees", "meets", "fenced"))
    model = LatentClassModel(items, 2, groups=Groups("site", ("hill", "lake")), free_by_group=True)
    responses = model.simulate(80, seed=3).responses
    posterior = model.sample(responses, seed=3, draws=100, ess=10, max_sweeps=1000, progress=False)
    facts = Facts(made.content(posterior))
    assert facts.response_groups == ("hill", "lake")
    figures = list(profile_figures(facts))
    assert [figure.name for figure in figures] == ["profile-1-group-1", "profile-1-group-2"]
    assert "in lake" in figures[1].caption
    assert figures[0].svg != figures[1].svg
    assert portrait(facts, "1").startswith("In hill: ")
