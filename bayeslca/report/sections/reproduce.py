"""How to reproduce: software, seed, data, command and study file."""

from __future__ import annotations

import platform
from collections.abc import Mapping
from importlib.metadata import PackageNotFoundError, version

from bayeslca.report.blocks import Block, Head, PageTable, Paragraph, Section, Verbatim
from bayeslca.report.facts import Facts
from bayeslca.report.wording import counted

ANCHOR, HEADING = "reproduce", "How to reproduce"

_USED = ("numpy", "scipy", "pandas", "numba", "xarray", "arviz-stats", "matplotlib")
_USED_BY_NUTS = ("pymc", "pytensor", "nutpie")


def software_versions(sampler: str = "gibbs") -> Mapping[str, str]:
    """Return the versions of Python, of bayeslca and of what it computes with."""
    names = ["bayeslca", *_USED, *(_USED_BY_NUTS if sampler == "nuts" else ())]
    versions = {"Python": platform.python_version()}
    for name in names:
        try:
            versions[name] = version(name)
        except PackageNotFoundError:
            continue
    return versions


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
