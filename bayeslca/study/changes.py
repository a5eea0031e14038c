"""What moved since the last run into the same folder."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

from bayeslca.report.content import Change
from bayeslca.study.results import Results

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior
    from bayeslca.relate.weighted.weighted_posterior import WeightedPosterior

KEYS = ["group", "latent_class", "item", "category"]


def changes_since(
    previous: Results | None, posterior: Posterior, interval: float
) -> tuple[Change, ...]:
    """List the prevalences and response probabilities that moved since the run before.

    A number moved when its median now lies further from its median then than four Monte Carlo
    standard errors of both runs allow; numbers that came or went are listed as well.
    """
    if previous is None:
        return ()
    now = {
        "prevalence": posterior.prevalence(interval=interval),
        "response_probabilities": posterior.response_probabilities(interval=interval),
    }
    return tuple(
        change for name, table in now.items() for change in _moved(previous.table(name), table)
    )


def weighted_changes(
    previous: Results | None, weighted: WeightedPosterior, interval: float
) -> tuple[Change, ...]:
    """List the weighted prevalences that moved since the run before."""
    if previous is None:
        return ()
    found = _moved(previous.table("weighted_prevalence"), weighted.prevalence(interval))
    return tuple(replace(change, what=f"weighted {change.what}") for change in found)


def _moved(before: pd.DataFrame | None, now: pd.DataFrame) -> list[Change]:
    if before is None:
        return []
    then_rows, now_rows = _by_key(before), _by_key(now)
    changes = []
    for key in {**then_rows, **now_rows}:
        then, new = then_rows.get(key), now_rows.get(key)
        if then is not None and new is not None and not _differs(then, new):
            continue
        changes.append(Change(_in_words(key), _printed(then), _printed(new)))
    return changes


def _by_key(table: pd.DataFrame) -> dict[tuple[str, ...], dict[str, float]]:
    keys = [key for key in KEYS if key in table.columns]
    return {
        tuple(str(row[key]) for key in keys): {
            column: float(row[column]) for column in ("median", "lower", "upper", "mcse")
        }
        for row in table.to_dict("records")
    }


def _differs(then: dict[str, float], now: dict[str, float]) -> bool:
    error = (then["mcse"] ** 2 + now["mcse"] ** 2) ** 0.5
    return abs(now["median"] - then["median"]) > 4 * error if error == error else False


def _in_words(key: tuple[str, ...]) -> str:
    if len(key) >= 3:
        *rest, item, category = key
        return f"{item} = {category} in {', '.join(reversed(rest))}"
    return f"prevalence of {', '.join(reversed(key))}"


def _printed(row: dict[str, float] | None) -> str:
    if row is None:
        return "not there"
    return f"{row['median']:.0%} ({row['lower']:.0%} to {row['upper']:.0%})".replace("%", " %")
