"""What the page says of a model that the cases do not settle, and of small groups."""

from __future__ import annotations

from types import SimpleNamespace
from typing import Any

import pytest

from bayeslca.findings import Finding
from bayeslca.report.blocks import Bullets, Paragraph
from bayeslca.report.facts import Facts
from bayeslca.report.sections.answer import answer_section
from bayeslca.report.sections.limits import limits_section
from bayeslca.responses.item import Groups

NAMES = tuple(f"P(item_{n}=yes | a)" for n in range(1, 9))


def facts_with(made: SimpleNamespace, *findings: Finding, **more: Any) -> Facts:
    posterior = made.posterior(made.items(3), 2, findings=findings, **more)
    return Facts(made.content(posterior))


def answer_of(facts: Facts) -> str:
    blocks = answer_section(facts).blocks
    return " ".join(block.text for block in blocks if isinstance(block, Paragraph))


def limits_of(facts: Facts) -> str:
    (bullets,) = limits_section(facts).blocks
    assert isinstance(bullets, Bullets)
    return "\n".join(" ".join(entry) for entry in bullets.entries)


@pytest.mark.parametrize(
    ("kind", "in_answer", "in_limits"),
    [
        ("not_identified", "cannot determine all of this model", "cannot determine all of the"),
        ("weakly_identified", "hardly determine some of this model", "hardly determine some of"),
    ],
)
def test_answer_and_limits_say_what_the_cases_do_not_settle(
    made: SimpleNamespace, kind: str, in_answer: str, in_limits: str
) -> None:
    facts = facts_with(made, Finding(kind=kind, level="warning", message="m", about=NAMES))
    assert in_answer in answer_of(facts)
    said = limits_of(facts)
    assert in_limits in said
    assert "P(item_6=yes | a) and others" in said
    assert "P(item_7=yes | a)" not in said


def test_nothing_is_said_of_a_model_that_is_settled(made: SimpleNamespace) -> None:
    facts = facts_with(made)
    assert "determine" not in answer_of(facts) + limits_of(facts)
    assert "Few cases in" not in limits_of(facts)


def test_limits_name_small_groups(made: SimpleNamespace) -> None:
    groups = Groups("herd", ("hill", "lake"))
    few = facts_with(made, groups=groups, n_cases=30)
    hill, lake = few.posterior.group_cases
    assert f"Few cases in hill ({hill:.0f}) and lake ({lake:.0f}):" in limits_of(few)
    many = facts_with(made, groups=groups, n_cases=300)
    assert "Few cases in hill" not in limits_of(many)
