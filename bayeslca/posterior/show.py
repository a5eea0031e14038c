"""How a posterior shows itself in a terminal and in a notebook."""

from __future__ import annotations

import textwrap
from html import escape
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from bayeslca.posterior.posterior import Posterior

WIDTH = 80
_NAME = 32
"""Longest class name that is shown whole."""


def _head(posterior: Posterior) -> str:
    model, responses = posterior.model, posterior.responses
    n = model.n_classes
    classes = "1 class" if n == 1 else f"{n} classes"
    source = f" of {responses.source}" if responses.source else ""
    return (
        f"Posterior of a latent class model: {classes}, {len(model.items)} items, "
        f"{responses.n_cases} cases{source}"
    )


def _sampled(posterior: Posterior) -> str:
    draws = posterior.draws
    seed = "without a seed" if draws.seed is None else f"seed {draws.seed}"
    return (
        f"{draws.n_chains} chains of {draws.n_draws} kept draws "
        f"({draws.sampler}, {draws.sweeps} sweeps each, {seed})"
    )


def _rows(posterior: Posterior) -> tuple[list[tuple[str, str, str]], str]:
    """Return a row (class, prevalence, cases) per class (and group), and what they are."""
    frame = posterior.prevalence()
    grouped = posterior.model.groups is not None
    rows = []
    shown = frame
    if posterior.model.pooled and posterior.model.groups is not None:
        # Units may be many: partial_pooling shows each of them.
        shown = frame[~frame["group"].isin(posterior.model.groups.levels)]
    for row in shown.to_dict("records"):
        name = f"{row['latent_class']}, {row['group']}" if grouped else str(row["latent_class"])
        share = f"{row['median']:.1%} ({row['lower']:.1%} to {row['upper']:.1%})"
        cases = ""
        if row["cases"] == row["cases"]:  # a unit that was not observed has no cases
            cases = f"{row['cases']:.0f} ({row['cases_lower']:.0f} to {row['cases_upper']:.0f})"
        rows.append((name, share, cases))
    return rows, "median (95 % interval)"


def _unweighted(posterior: Posterior) -> list[str]:
    if posterior.responses.design is None:
        return []
    text = (
        "Unweighted: it takes the cases as they are. bayeslca.sample_weighted(model, responses) "
        "speaks of the population."
    )
    return textwrap.wrap(text, WIDTH)


def as_terminal_text(posterior: Posterior) -> str:
    """Return classes, prevalences and the verdict, at most 80 columns wide."""
    rows, of = _rows(posterior)
    shown = [(textwrap.shorten(name, _NAME, placeholder="..."), *rest) for name, *rest in rows]
    name_width = max(len("class"), *(len(row[0]) for row in shown))
    share_width = max(len("prevalence"), *(len(row[1]) for row in shown))
    lines = [f"{'class':<{name_width}}  {'prevalence':<{share_width}}  cases"]
    lines += [f"{a:<{name_width}}  {b:<{share_width}}  {c}".rstrip() for a, b, c in shown]
    return "\n".join(
        [
            *textwrap.wrap(_head(posterior), WIDTH),
            *textwrap.wrap(_sampled(posterior), WIDTH),
            "",
            *lines,
            f"{of}",
            "",
            *_unweighted(posterior),
            *textwrap.wrap(posterior.diagnostics().verdict, WIDTH),
        ]
    )


def as_html(posterior: Posterior) -> str:
    """Return the same as HTML; everything that comes from data is escaped."""
    rows, of = _rows(posterior)
    body = "".join(
        f"<tr>{''.join(f'<td>{escape(cell)}</td>' for cell in row)}</tr>" for row in rows
    )
    heads = ("class", f"prevalence, {of}", f"cases, {of}")
    return (
        f"<p><strong>{escape(_head(posterior))}</strong><br>{escape(_sampled(posterior))}</p>"
        f"<table><thead><tr>{''.join(f'<th>{escape(head)}</th>' for head in heads)}</tr></thead>"
        f"<tbody>{body}</tbody></table>"
        f"<p>{escape(' '.join(_unweighted(posterior)))}</p>"
        f"<p>{escape(posterior.diagnostics().verdict)}</p>"
    )
