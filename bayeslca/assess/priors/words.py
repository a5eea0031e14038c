"""What the priors do, in words: a diagnosis per quantity, findings, and a verdict."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from typing import TYPE_CHECKING, Any

from bayeslca.assess.priors.power_scaling import RELIABLE_K, SENSITIVE, PowerScaling
from bayeslca.findings import Finding
from bayeslca.model.alternative_priors import JEFFREYS

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.assess.priors.other_priors import Moved

MOST_NAMED = 4
LITTLE = "the data say little about it"
UNSEEN = "its own prior is flat, which power scaling cannot see"
PARTLY_UNSEEN = "a part of its prior is flat, which power scaling cannot see"


def diagnosis(row: Mapping[Any, Any], scaling: PowerScaling) -> str:
    """Return what the figures say of one quantity.

    A quantity whose own prior is flat is never called insensitive to it.

    Parameters
    ----------
    row : mapping
        Of the table of `bayeslca.assess.priors.prior_sensitivity.PriorSensitivity`.
    scaling : PowerScaling
    """
    if row["mostly_prior"]:
        start = f"rests mostly on its prior: {LITTLE}"
    else:
        start = _by_scaling(row, scaling)
    if row["own_prior"] == "informative":
        return start
    unseen = UNSEEN if row["own_prior"] == "flat" else PARTLY_UNSEEN
    return f"{start}; {unseen}" if start else unseen


def _by_scaling(row: Mapping[Any, Any], scaling: PowerScaling) -> str:
    prior, likelihood = float(row["prior_sensitivity"]), float(row["likelihood_sensitivity"])
    if scaling.likelihood_k > RELIABLE_K or scaling.prior_k > RELIABLE_K:
        return "power scaling is not reliable here (Pareto k too high)"
    if math.isnan(likelihood):
        return "it never varies"
    own = "its prior" if row["own_prior"] == "informative" else "the stated priors"
    if prior >= SENSITIVE and likelihood >= SENSITIVE:
        return f"moves with {own} and with the data, which may disagree"
    if prior >= SENSITIVE:
        return f"rests on {own}: {LITTLE}"
    if likelihood < SENSITIVE:
        return LITTLE
    return "moves with the data, hardly with its prior" if row["own_prior"] == "informative" else ""


def sensitivity_findings(
    table: pd.DataFrame, moved: pd.DataFrame, fits: Sequence[Moved], scaling: PowerScaling
) -> Iterator[Finding]:
    """Yield what should be known of the priors' part in the results."""
    heavy = table.loc[table["mostly_prior"], "quantity"].tolist()
    if heavy:
        yield Finding(
            kind="rests_on_prior",
            level="warning",
            message=f"{_count(len(heavy), 'quantity rests', 'quantities rest')} mostly on the "
            f"prior: {named(heavy)}",
            remedy="Say so where they are used; more cases or an argued prior would help.",
            about=tuple(heavy),
            value=float(len(heavy)),
        )
    best = best_known(moved)
    for prior in dict.fromkeys(best["prior"]):
        mine = best[(best["prior"] == prior) & best["far"] & best["reliable"]]
        if len(mine):
            names = mine["quantity"].tolist()
            yield Finding(
                kind="moved_by_prior",
                level="warning",
                message=f"under priors {called(prior)}, "
                f"{_count(len(names), 'quantity moves', 'quantities move')} by more than one "
                f"posterior standard deviation: {named(names)}",
                remedy="Report them under both priors, and say where the prior comes from.",
                about=tuple(names),
                value=float(mine["moved"].abs().max()),
            )
    conflict = _conflicts(table, scaling)
    if conflict:
        yield Finding(
            kind="prior_and_data_disagree",
            level="note",
            message=f"{_count(len(conflict), 'quantity', 'quantities')} with a stated prior "
            f"{'moves' if len(conflict) == 1 else 'move'} with the prior and with the data: "
            f"{named(conflict)}",
            remedy="Look whether prior and answers say different things of them.",
            about=tuple(conflict),
        )
    for prior in untried(fits):
        yield Finding(
            kind="prior_not_tried",
            level="note",
            message=f"what priors {called(prior)} would give is not known: weights of the draws "
            "are not reliable, and no refit that can be trusted was made",
            remedy=f"Fit again under it: refit=[{prior!r}].",
            about=(prior,),
        )


def _conflicts(table: pd.DataFrame, scaling: PowerScaling) -> list[str]:
    if not scaling.prior_k <= RELIABLE_K or scaling.likelihood_k > RELIABLE_K:
        return []
    both = (table["prior_sensitivity"] >= SENSITIVE) & (
        table["likelihood_sensitivity"] >= SENSITIVE
    )
    own = table["own_prior"] == "informative"
    return list(table.loc[both & own & (table["kind"] != "hypothesis"), "quantity"])


def best_known(moved: pd.DataFrame) -> pd.DataFrame:
    """Return one row per quantity and prior: of the refit where there is one that is reliable."""
    if moved.empty:
        return moved
    order = moved["reliable"].astype(int) * 2 + (moved["method"] == "refit").astype(int)
    ranked = moved.assign(_order=order)
    best = ranked.groupby(["kind", "quantity", "prior"], sort=False)["_order"].idxmax()
    return moved.loc[sorted(best)]


def untried(fits: Sequence[Moved]) -> list[str]:
    """Return the priors of which neither weights nor a refit can be relied on."""
    names = dict.fromkeys(one.prior for one in fits)
    return [name for name in names if not any(f.reliable for f in fits if f.prior == name)]


def verdict_in_words(
    table: pd.DataFrame,
    moved: pd.DataFrame,
    fits: Sequence[Moved],
    left_out: Mapping[str, str],
) -> str:
    """Return what the priors do, in a few sentences."""
    unknown = untried(fits)
    tried = [p for p in dict.fromkeys(one.prior for one in fits) if p not in unknown]
    best = best_known(moved)
    says = []
    if tried:
        known = best[best["prior"].isin(tried) & (best["kind"] != "hypothesis")]
        far = list(dict.fromkeys(known.loc[known["far"], "quantity"]))
        priors = " or ".join(called(prior) for prior in tried)
        if far:
            says.append(
                f"Under priors {priors}, {_count(len(far), 'quantity moves', 'quantities move')} "
                f"by more than one posterior standard deviation: {named(far)}."
            )
        elif known["moved"].notna().any():
            row = known.loc[known["moved"].abs() == known["moved"].abs().max()].iloc[0]
            says.append(
                f"Under priors {priors}, no quantity moves by more than one posterior standard "
                f"deviation; the most is {abs(float(row['moved'])):.2f}, of {row['quantity']} "
                f"(priors {called(str(row['prior']))})."
            )
    if unknown:
        priors = " or ".join(called(prior) for prior in unknown)
        says.append(f"What priors {priors} would give is not known: they were not fitted.")
    heavy = table.loc[table["mostly_prior"], "quantity"].tolist()
    total = int((table["kind"] != "hypothesis").sum())
    if heavy:
        says.append(
            f"The data say little about {named(heavy)}: {len(heavy)} of {total} quantities "
            f"{'rests' if len(heavy) == 1 else 'rest'} mostly on the prior."
        )
    else:
        says.append(f"None of {total} quantities rests mostly on its prior.")
    flat = int((table["own_prior"] == "flat").sum())
    if flat:
        says.append(
            f"The priors of {flat} of {len(table)} are flat: power scaling, which cannot see a "
            "flat prior, says nothing of these."
        )
    return " ".join(says)


def called(prior: str) -> str:
    """Return how priors of a name are called in a sentence."""
    if prior == JEFFREYS:
        return "by Jeffreys' rule"
    return prior if prior.endswith("strong") else f"that are {prior}"


def named(names: Sequence[str]) -> str:
    """Return names as text that stops after some and counts the others."""
    shown = list(names[:MOST_NAMED])
    more = len(names) - len(shown)
    if more:
        shown.append(f"{more} more")
    return shown[0] if len(shown) == 1 else f"{', '.join(shown[:-1])} and {shown[-1]}"


def _count(n: int, one: str, many: str) -> str:
    return f"{n} {one if n == 1 else many}"
