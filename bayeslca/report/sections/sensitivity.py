"""What the priors did: how much rests on them, and what moves under others."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from bayeslca.assess.hypothesis.grades import bayes_factor_text
from bayeslca.assess.priors.words import best_known, called
from bayeslca.report.blocks import (
    Block,
    Bullets,
    Head,
    PageTable,
    Paragraph,
    Picture,
    Section,
    Subheading,
)
from bayeslca.report.facts import Facts
from bayeslca.report.figures import WIDTH, draw
from bayeslca.report.palette import PRIOR_MARK
from bayeslca.report.sections.portraits import PRIOR_LEGEND
from bayeslca.report.sensitivity_plot import ROW, drawn, plot_prior_and_posterior
from bayeslca.report.tables import records
from bayeslca.report.wording import NOTHING, decimal, percent, sentence, significant

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.assess.priors.prior_sensitivity import PriorSensitivity

ANCHOR, HEADING = "prior-sensitivity", "What the priors did"
FAR_MARK, UNSURE_MARK = "!", "?"
MOST_ROWS = 12
"""A longer table is folded."""


def sensitivity_section(facts: Facts) -> Section | None:
    """Return the section on what the priors did; None where it was not looked at."""
    found = facts.content.sensitivity
    if found is None:
        return None
    blocks: list[Block] = [Paragraph(found.verdict)]
    if found.findings:
        blocks.append(
            Bullets(tuple((sentence(one.message), sentence(one.remedy)) for one in found.findings))
        )
    blocks += [Subheading("Would other priors have changed it?"), Paragraph(_how_tried(found))]
    blocks += [_moved_table(found), *_hypotheses(found)]
    blocks += [Subheading("How much rests on the priors")]
    if drawn(found):
        blocks.append(_picture(found))
    blocks += [Paragraph(_how_to_read(found)), _rests_table(found)]
    return Section(ANCHOR, HEADING, tuple(blocks))


def _how_tried(found: PriorSensitivity) -> str:
    text = (
        "“Half as strong” and “twice as strong” halve and double every Beta and Dirichlet "
        "parameter, also those of the default priors. Each was tried by weighing the draws; a "
        "refit was made where that says so."
    )
    if found.left_out:
        whys = [f"{name}: {why}" for name, why in found.left_out.items()]
        text += f" Left out: {'; '.join(whys)}."
    notes = [
        sentence(f"priors {called(row['prior'])}, by {row['method']}: {row['note']}")
        for row in found.priors.to_dict("records")
        if row["note"]
    ]
    return " ".join([text, *notes])


def _moved_table(found: PriorSensitivity) -> PageTable:
    best = best_known(found.moved)
    best = best[best["kind"] != "hypothesis"]
    priors = list(dict.fromkeys(best["prior"]))
    how = {p: best.loc[best["prior"] == p, "method"].iloc[0] for p in priors}
    cells = {(r["kind"], r["quantity"], r["prior"]): r for r in best.to_dict("records")}
    rows = []
    for row in _by_movement(found.table, best).to_dict("records"):
        mine = [cells[row["kind"], row["quantity"], prior] for prior in priors]
        shown = [_moved(one) for one in mine]
        rows.append((_name(row), _mean(row), *shown))
    heads = (
        Head("Quantity", "the largest movements first", numeric=False),
        Head("As stated", "mean ± spread under the study's priors"),
        *(
            Head(prior[0].upper() + prior[1:], f"moved, in spreads; by {how[prior]}")
            for prior in priors
        ),
    )
    notes = []
    if best["far"].any():
        notes.append(f"{FAR_MARK} moved by more than one posterior standard deviation (spread).")
    if not best["reliable"].all():
        notes.append(f"{UNSURE_MARK} not reliable: see above.")
    if found.table["mostly_prior"].any():
        notes.append(PRIOR_LEGEND)
    return PageTable(
        "What moves under other priors", heads, tuple(rows), tuple(notes), len(rows) > MOST_ROWS
    )


def _by_movement(table: pd.DataFrame, best: pd.DataFrame) -> pd.DataFrame:
    shown = table[table["kind"] != "hypothesis"]
    most = best["moved"].abs().groupby([best["kind"], best["quantity"]]).max()
    keys = list(zip(shown["kind"], shown["quantity"], strict=True))
    order = [-float(most.get(key, 0.0)) if most.get(key, 0.0) == most.get(key, 0.0) else 0.0
             for key in keys]  # fmt: skip
    return shown.assign(_order=order).sort_values("_order", kind="stable")


def _moved(row: dict[Any, Any]) -> str:
    if row["moved"] != row["moved"]:
        return NOTHING
    text = decimal(row["moved"], 2)
    sign = "" if text.startswith("−") or text == "0.00" else "+"
    mark = f" {FAR_MARK}" if row["far"] else ""
    return f"{sign}{text}{mark}" + ("" if row["reliable"] else f" {UNSURE_MARK}")


def _name(row: dict[Any, Any]) -> str:
    return f"{row['quantity']}{f' {PRIOR_MARK}' if row['mostly_prior'] else ''}"


def _mean(row: dict[Any, Any]) -> str:
    if row["mean"] != row["mean"]:
        return NOTHING
    if row["kind"] == "quantity":
        return f"{significant(row['mean'])} ± {significant(row['sd'])}"
    return f"{percent(row['mean'])} ± {percent(row['sd'])}"


def _hypotheses(found: PriorSensitivity) -> list[Block]:
    if found.hypotheses.empty:
        return []
    rows = []
    shown = found.hypotheses
    refitted = {(r["claim"], r["prior"]) for r in records(shown) if r["method"] == "refit"}
    for row in records(shown):
        if row["method"] == "weights" and (row["claim"], row["prior"]) in refitted:
            continue
        first = row["prior"] == "as stated"
        factor = row["log_bayes_factor"]
        rows.append(
            (
                str(row["claim"]) if first else "",
                str(row["prior"]),
                _share(row["prior_probability"]),
                _share(row["posterior_probability"]),
                NOTHING if factor is None else bayes_factor_text(float(str(factor))),
                str(row["note"] or row["grade"] or f"by {row['method']}"),
            )
        )
    heads = (
        Head("Claim", "as the study words it", numeric=False),
        Head("Prior", "that the model has", numeric=False),
        Head("Probability before", "under that prior"),
        Head("Probability after", "after the data"),
        Head("Bayes factor", "against the model"),
        Head("In words", "grade, or why there is none", numeric=False),
    )
    says = (
        "A Bayes factor weighs a hypothesis by its prior, so that it changes with the prior even "
        "where the estimates hardly move."
    )
    return [Paragraph(says), PageTable("The hypotheses under other priors", heads, tuple(rows))]


def _share(value: object) -> str:
    return NOTHING if value is None else percent(float(str(value)))


def _picture(found: PriorSensitivity) -> Picture:
    names = drawn(found)
    figure = draw(
        "prior-and-posterior",
        lambda drawing: plot_prior_and_posterior(found, ax=drawing.subplots()),
        size=(WIDTH, 1.2 + ROW * len(names)),
        caption=(
            "The quantities whose posterior lies most where the prior already lay: grey with a "
            "dashed edge before the data, blue after; on the right how much of the two areas "
            f"overlaps. {PRIOR_MARK} rests mostly on the prior."
        ),
        alt="Densities before and after the data. The overlaps stand in the table below.",
    )
    return Picture(figure)


def _how_to_read(found: PriorSensitivity) -> str:
    text = (
        "The overlap is the area that the densities before and after the data share: 100 % means "
        "that the answers changed nothing. Power scaling raises all stated priors, or the "
        "likelihood, to a power near 1 and measures how far the posterior moves (Kallioinen, "
        "Paananen, Bürkner & Vehtari 2024); 0.05 or more is a sign of sensitivity. Raising a flat "
        "prior to a power leaves it as it is, so that power scaling says nothing of it: for those "
        "quantities only the priors tried above do."
    )
    k = max((x for x in (found.scaling.prior_k, found.scaling.likelihood_k) if x == x), default=0)
    return (
        f"{text} The weights behind it have a Pareto k of {decimal(k, 2)} at most (up to 0.7 is "
        "fine)."
    )


def _rests_table(found: PriorSensitivity) -> PageTable:
    shown = found.table.sort_values(
        "prior_overlap", ascending=False, kind="stable", na_position="last"
    )
    rows = tuple(
        (
            _name(row),
            percent(row["prior_overlap"]),
            str(row["own_prior"]),
            decimal(row["prior_sensitivity"], 2),
            decimal(row["likelihood_sensitivity"], 2),
            str(row["diagnosis"]),
        )
        for row in shown.to_dict("records")
    )
    heads = (
        Head("Quantity", "the largest overlaps first", numeric=False),
        Head("Overlap", "of prior and posterior"),
        Head("Own prior", "flat ones are not seen by power scaling", numeric=False),
        Head("Moves with the priors", "power scaling; 0.05 or more is a sign"),
        Head("Moves with the data", "power scaling; below 0.05 is a sign"),
        Head("In words", "", numeric=False),
    )
    notes = (PRIOR_LEGEND,) if found.table["mostly_prior"].any() else ()
    return PageTable(
        "How much of each result rests on its prior", heads, rows, notes, len(rows) > MOST_ROWS
    )
