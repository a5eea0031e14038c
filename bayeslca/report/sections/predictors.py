"""What predicts class: odds ratios three ways, class probabilities along covariates, checks."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from bayeslca.relate.predictors.words import (
    CORRECTION_WORDS,
    WAY_WORDS,
    cases_in_words,
    headlines,
)
from bayeslca.report.blocks import (
    Banner,
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
from bayeslca.report.figures import WIDTH, Figure, draw
from bayeslca.report.predictor_plots import plot_class_probabilities
from bayeslca.report.wording import (
    NOTHING,
    called,
    counted,
    decimal,
    level,
    listed,
    percent_interval,
    sentence,
    significant,
)

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.relate.predictors.class_predictors import ClassPredictors

ANCHOR, HEADING = "predictors", "What predicts class"
MOST_PICTURES = 6
POINTS = 5
WAY_HEADS = {
    "joint": Head("Jointly", "answers and covariates shape the classes together"),
    "cut": Head("By a cut", "classes from the answers alone, drawn given the covariates"),
    "three_steps": Head("In three steps", "cases placed, the error of placement undone"),
}
CAUTION = (
    "Odds ratios and changes are associations in these cases, not effects of changing a "
    "covariate. Most probable classes were nowhere treated as data."
)


def predictors_section(facts: Facts) -> Section | None:
    """Return the section on predictors of class; None where the study did not ask."""
    found = facts.content.predictors
    if found is None:
        return None
    against, interval = facts.content.predictors_against, facts.content.interval
    first = facts.class_names[0] if against is None else against
    table = found.odds_ratios(against=against, interval=interval)
    blocks: list[Block] = [
        Paragraph(_opening(found)),
        *(Paragraph(sentence(text)) for text in headlines(found, interval)),
        *_findings(found),
        _odds_ratio_table(found, table, first, interval),
        *(Picture(figure) for figure in _pictures(found, interval)),
        _effects_table(found, interval),
        *_direct_effects(found),
        Subheading("How it was done"),
        Bullets(tuple(_methods(found))),
        Paragraph(CAUTION),
    ]
    return Section(ANCHOR, HEADING, tuple(blocks))


def predictor_tables(
    found: ClassPredictors, against: str | None, interval: float
) -> dict[str, tuple[str, pd.DataFrame]]:
    """Return the tables for the files, by name, with a title each."""
    import pandas as pd

    renamed = {name: f"class_{name}" for name in ODDS} | {"meaning": "step"}
    along = [
        found.class_probabilities(name, interval)
        .assign(covariate=name)
        .astype({"value": "str"})
        .rename(columns={"value": "covariate_value"})
        for name in found.design.covariates
    ]
    tables = {
        "predictors": (
            "What predicts class: odds ratios",
            found.odds_ratios(against, interval).rename(columns=renamed),
        ),
        "predictor_effects": (
            "What predicts class: mean changes in class probabilities",
            found.marginal_effects(interval),
        ),
        "predictor_probabilities": (
            "Probabilities of the classes along each covariate",
            pd.concat(along, ignore_index=True)[
                ["covariate", *[c for c in along[0].columns if c != "covariate"]]
            ],
        ),
    }
    if found.draws:
        tables["direct_effects"] = (
            "Whether covariates go with answers beyond class",
            found.direct_effects().rename(columns={"p_value": "p_one_test"}),
        )
    return tables


ODDS = ("odds_ratio", "odds_ratio_lower", "odds_ratio_upper")


def _opening(found: ClassPredictors) -> str:
    return (
        f"Class was regressed on {listed(found.design.covariates)} ({cases_in_words(found)}). "
        f"What follows rests on the classes as found {WAY_WORDS[found.main_way]}."
    )


def _findings(found: ClassPredictors) -> list[Block]:
    loud = [f for f in found.findings if f.level != "note"]
    quiet = [f for f in found.findings if f.level == "note"]
    blocks: list[Block] = []
    if loud:
        texts = tuple(f"{sentence(f.message)} {sentence(f.remedy)}".strip() for f in loud)
        blocks.append(Banner("Before these numbers are used", texts))
    if quiet:
        blocks.append(Bullets(tuple((sentence(f.message), "") for f in quiet)))
    return blocks


def _odds_ratio_table(
    found: ClassPredictors, table: pd.DataFrame, against: str, interval: float
) -> PageTable:
    cells = {
        (row["covariate"], row["latent_class"], row["way"]): _ratio(row)
        for row in table.to_dict("records")
    }
    rows = tuple(
        (
            column.name,
            column.meaning,
            called(name),
            *(cells[column.name, name, w] for w in found.ways),
        )
        for column in found.design.columns[1:]
        for name in found.class_names
        if name != against
    )
    return PageTable(
        f"Odds ratios of each class against {called(against)}, with {level(interval)} intervals",
        (
            Head("Covariate", "column of the regression", numeric=False),
            Head("Step", "what changes", numeric=False),
            Head("Class", f"its odds against {called(against)}", numeric=False),
            *(WAY_HEADS[way] for way in found.ways),
        ),
        rows,
        notes=(
            "Above 1: the class is more probable, against the other, where the covariate is "
            "higher or the category holds. No class is the model's reference: ratios against "
            "another class follow from these.",
        ),
    )


def _ratio(row: Mapping[Any, Any]) -> str:
    value, low, high = (float(row[name]) for name in ODDS)
    return f"{_short(value)} ({_short(low)} to {_short(high)})"


def _short(ratio: float) -> str:
    if ratio > 1000.0:
        return "above 1,000"
    return "below 0.01" if ratio < 0.01 else significant(ratio)


def _pictures(found: ClassPredictors, interval: float) -> list[Figure]:
    figures = []
    for number, covariate in enumerate(found.design.covariates[:MOST_PICTURES], start=1):
        figures.append(
            draw(
                f"predictor-{number}",
                lambda drawing, name=covariate: plot_class_probabilities(  # type: ignore[misc]
                    found, name, interval=interval, ax=drawing.subplots()
                ),
                size=(WIDTH, 3.5),
                caption=(
                    f"Probability of each class along {covariate}: the mean over the cases, had "
                    "all of them this value and their own other covariates."
                    + ("" if found.design.levels_of(covariate) else " Ticks below: cases.")
                ),
                alt=_alt(found, covariate, interval),
            )
        )
    return figures


def _alt(found: ClassPredictors, covariate: str, interval: float) -> str:
    table = found.class_probabilities(covariate, interval, points=2)
    parts = []
    for value, rows in table.groupby("value", sort=False):
        shown = significant(value, 3) if isinstance(value, float) else str(value)
        shares = [
            f"{called(str(row['latent_class']))} "
            f"{percent_interval(row['median'], row['lower'], row['upper'])}"
            for row in rows.to_dict("records")
        ]
        parts.append(f"at {shown}: {', '.join(shares)}")
    return f"Class probabilities along {covariate}; {'; '.join(parts)}."


def _effects_table(found: ClassPredictors, interval: float) -> PageTable:
    table = found.marginal_effects(interval, found.main_way)
    names = found.class_names
    by_change: dict[tuple[str, str], dict[str, str]] = {}
    for row in table.to_dict("records"):
        cell = " ".join(
            (
                _points(row["median"]),
                f"({_points(row['lower'])} to {_points(row['upper'])})",
            )
        )
        key = (str(row["covariate"]), str(row["change"]))
        by_change.setdefault(key, {})[str(row["latent_class"])] = cell
    rows = tuple((*key, *(cells[name] for name in names)) for key, cells in by_change.items())
    return PageTable(
        f"Changes in class probabilities, in percentage points ({level(interval)} intervals)",
        (
            Head("Covariate", "the others stay as they are", numeric=False),
            Head("Change", "of this covariate", numeric=False),
            *(Head(called(name), "mean change over the cases") for name in names),
        ),
        rows,
    )


def _points(share: float) -> str:
    value = decimal(100.0 * share, 0)
    return value if value.startswith("−") or value in ("0", NOTHING) else f"+{value}"


def _direct_effects(found: ClassPredictors) -> list[Block]:
    if not found.draws:
        return []
    effects = found.direct_effects_by_item
    table = effects.table
    n_tested = int(table["z"].notna().sum())
    texts = tuple(f"{sentence(f.message)} {sentence(f.remedy)}" for f in effects.findings)
    said = (
        f"Of {counted(n_tested, 'pair')} of an answer and a covariate, none goes together beyond "
        "class once all tests are counted (Holm). Small direct effects cannot be ruled out."
    )
    if not n_tested:
        said = (
            "Too few answers speak of this: not one pair of an answer and a covariate had a test."
        )
    elif n_tested < len(table):
        said += (
            f" {counted(len(table) - n_tested, 'pair')} with too few answers to tell had no test."
        )
    shown = (
        table.dropna().reindex(table.dropna()["z"].abs().sort_values(ascending=False).index).head(8)
    )
    rows = tuple(
        (
            f"{row['item']} = {row['category']}",
            str(row["covariate"]),
            f"{decimal(row['log_odds'], 2)} ± {decimal(row['sd'], 2)}",
            decimal(row["z"], 1),
            _p(row["p_adjusted"]),
        )
        for row in shown.to_dict("records")
    )
    return [
        Subheading("Do covariates act through class alone?"),
        *([Banner("Direct effects", texts)] if texts else [Paragraph(said)]),
        *[
            PageTable(
                "The largest direct effects",
                (
                    Head("Answer", "", numeric=False),
                    Head("Covariate", "column of the regression", numeric=False),
                    Head("Log odds", "change in the log odds of the answer, class given"),
                    Head("z", "in standard errors (score test)"),
                    Head("p, all tests", "adjusted for the number of tests"),
                ),
                rows,
                folded=True,
            )
        ][: len(rows) > 0],
    ]


def _p(value: float) -> str:
    return "below 0.001" if value < 0.001 else decimal(value, 3)


def _methods(found: ClassPredictors) -> list[tuple[str, str]]:
    scale, intercept = found.prior_sd[-1], found.prior_sd[0]
    out = [
        (
            "Model",
            f"multinomial logistic regression, {found.design.formula.text}; every class has "
            "coefficients of its own. Numbers are standardised, categories compared with the "
            "commonest.",
        ),
        (
            "Priors",
            f"coefficients are normal around 0 with standard deviation {scale:.3g} in every class "
            f"(two classes' then differ by {scale * 2**0.5:.2g}), intercepts with {intercept:.3g}.",
        ),
    ]
    for way in found.ways:
        text = {
            "joint": "one posterior of answers and covariates, by Gibbs sampling with Polya-Gamma "
            "variables (Polson, Scott & Windle 2013).",
            "cut": "response probabilities are draws of the model without covariates; at each, "
            "classes and coefficients were sampled together (Plummer 2015).",
            "three_steps": f"{CORRECTION_WORDS[found.three_steps.correction]}; "
            f"{100 * found.three_steps.first_step_share:.0f} % of the variance comes from the "
            "first step."
            if found.three_steps is not None
            else "",
        }[way]
        out.append((WAY_HEADS[way].words, text))
    return out
