"""How to reproduce: software, seed, data, command and study file."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

from bayeslca.report.blocks import Block, Head, PageTable, Paragraph, Section, Verbatim
from bayeslca.report.facts import Facts
from bayeslca.report.wording import counted

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

ANCHOR, HEADING = "reproduce", "How to reproduce"

NUTS_ONLY = ("pymc", "nutpie")


def software_versions(posterior: Posterior) -> Mapping[str, str]:
    """Return the versions of what made a posterior, leaving out what it did not use."""
    unused = () if posterior.draws.sampler == "nuts" else NUTS_ONLY
    return {
        "Python" if name == "python" else name: version
        for name, version in posterior.versions.items()
        if name not in unused
    }


def reproduce_section(facts: Facts, versions: Mapping[str, str]) -> Section:
    """Return the section on how to get the same numbers again."""
    content = facts.content
    responses = content.responses
    blocks: list[Block] = [
        Paragraph(
            "With the same versions, data and seed, the numbers come out the same to the last "
            "digit, whatever the number of threads."
        )
    ]
    if content.command:
        blocks.append(Verbatim(content.command))
    rows = [
        ("Seed", str(content.seed) if content.seed is not None else "not fixed"),
        (
            "Data",
            f"{responses.source or 'a table in memory'}, {counted(responses.n_cases, 'case')}",
        ),
        ("Fingerprint of the data (SHA-256)", responses.data_hash),
        *versions.items(),
    ]
    heads = (
        Head("What", "software, seed or data", numeric=False),
        Head("Value", "as used for this page", numeric=False),
    )
    blocks.append(PageTable("What this page was made with", heads, tuple(rows)))
    if content.study_text:
        blocks.append(Verbatim(content.study_text, "The study file"))
    blocks.append(
        Paragraph(
            "The fit itself is kept in fit.nc; all tables stand in tables.xlsx and in the folder "
            "tables, all figures in the folder figures."
        )
    )
    return Section(ANCHOR, HEADING, tuple(blocks))
