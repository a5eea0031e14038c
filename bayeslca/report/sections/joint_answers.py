"""Answers given together: items that go together within a class, and how much."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from bayeslca.report.blocks import Block, Head, PageTable, Paragraph, Section
from bayeslca.report.facts import Facts
from bayeslca.report.wording import (
    NOTHING,
    called,
    decimal,
    level,
    listed,
    number_interval,
    percent,
    percent_interval,
    significant,
)

if TYPE_CHECKING:
    from bayeslca.model.answered_together import ItemSet
    from bayeslca.model.latent_class_model import LatentClassModel

ANCHOR, HEADING = "joint-answers", "Answers given together"
SURE = 0.95
"""Items are said to go together when that has at least this probability."""


def joint_answers_section(facts: Facts) -> Section | None:
    """Return the section on items that are answered together; None where there are none."""
    if not facts.posterior.model.item_sets:
        return None
    dependence = facts.posterior.conditional_dependence(interval=facts.content.interval)
    rows: list[dict[str, Any]] = [
        {str(key): value for key, value in row.items()} for row in dependence.to_dict("records")
    ]
    blocks: list[Block] = [Paragraph(_in_words(facts, rows))]
    if rows:
        blocks.append(_dependence_table(facts, rows))
    if facts.looks_diagnostic and rows:
        blocks.append(Paragraph(_of_tests(facts, rows)))
    blocks.append(_joint_table(facts))
    return Section(ANCHOR, HEADING, tuple(blocks))


def sets_in_words(model: LatentClassModel) -> str:
    """Return which items may go together: ``fees and accounts (in managed)``."""
    return "; ".join(_set_in_words(model, one) for one in model.item_sets)


def _set_in_words(model: LatentClassModel, one: ItemSet) -> str:
    text = listed([model.items[j].text for j in one.items])
    if len(one.classes) < model.n_classes:
        text += f" (in {listed([called(model.class_names[k]) for k in sorted(one.classes)])})"
    return text


def _in_words(facts: Facts, rows: list[dict[str, Any]]) -> str:
    model = facts.posterior.model
    text = (
        f"Within a class these may go together: {sets_in_words(model)}. Each of their joint "
        "answers has a probability of its own, so that the classes need not explain why they "
        "come together."
    )
    found = [row for row in rows if row["measure"] == "odds ratio"]
    sure = [row for row in found if max(row["positive"], 1.0 - row["positive"]) >= SURE]
    parts = [
        f"{_pair(facts, row)} in {_where(row)} (odds ratio "
        f"{_odds(row)}, {'more' if row['positive'] > 0.5 else 'less'} than by chance)"
        for row in sure
    ]
    if parts:
        text += f" They do, with a probability of at least {percent(SURE)}: {listed(parts)}."
    if len(sure) < len(found):
        unsure: dict[str, list[str]] = {}
        for row in found:
            if row not in sure:
                unsure.setdefault(_pair(facts, row), []).append(_where(row))
        open_pairs = [f"{pair} in {listed(places)}" for pair, places in unsure.items()]
        text += f" Not settled by the answers: {'; '.join(open_pairs)}."
    return text


def _of_tests(facts: Facts, rows: list[dict[str, Any]]) -> str:
    return (
        "Two tests that miss the same cases, or are misled by the same ones, confirm each other "
        "less than two independent tests would: given both results, membership takes the "
        "dependence into account. The covariance is the share of a class with both tests positive "
        "less what independent tests would have (Dendukuri & Joseph 2001). It is hard to tell "
        "from few tests or populations: read it with what was noticed before sampling about what "
        "the answers determine."
    )


def _dependence_table(facts: Facts, rows: list[dict[str, Any]]) -> PageTable:
    grouped = "group" in rows[0]
    by_place: dict[tuple[str, ...], dict[str, dict[str, Any]]] = {}
    for row in rows:
        key = (row["item_1"], row["item_2"], row["latent_class"], row.get("group", ""))
        by_place.setdefault(key, {})[row["measure"]] = row
    shown = tuple(
        (
            _pair(facts, found["odds ratio"]),
            called(key[2]),
            *([key[3] or "all"] if grouped else []),
            _odds(found["odds ratio"]),
            percent(found["odds ratio"]["positive"]),
            *(
                number_interval(*(found[name][end] for end in ("median", "lower", "upper")))
                for name in ("correlation", "covariance")
            ),
        )
        for key, found in by_place.items()
    )
    interval = f"median ({level(facts.content.interval)} interval)"
    heads = (
        Head("Items", "of one set", numeric=False),
        Head("Class", "the class that the row is about", numeric=False),
        *([Head("Group", "the group of cases", numeric=False)] if grouped else []),
        Head("Odds ratio", f"{interval}; 1: independent within the class"),
        Head("More than by chance", "probability that it is above 1"),
        Head("Correlation", f"of the answers within the class, {interval}"),
        Head("Covariance", _of_covariance(facts)),
    )
    return PageTable("How items go together within a class", heads, shown)


def _of_covariance(facts: Facts) -> str:
    model = facts.posterior.model
    if all(len(model.items[j].categories) == 2 for one in model.item_sets for j in one.items):
        return "share with both, less what independent items would have"
    return "of the answers, numbered in their order"


def _joint_table(facts: Facts) -> PageTable:
    frame = facts.posterior.joint_answers(interval=facts.content.interval)
    grouped = "group" in frame
    cells: dict[tuple[str, ...], dict[str, str]] = {}
    for row in frame.to_dict("records"):
        key = (str(row["items"]), str(row["joint_answer"]), str(row.get("group", "")))
        cells.setdefault(key, {})[str(row["latent_class"])] = percent_interval(
            row["median"], row["lower"], row["upper"]
        )
    rows = tuple(
        (
            key[1],
            *([key[2] or "all"] if grouped else []),
            *(found.get(name, NOTHING) for name in facts.class_names),
        )
        for key, found in cells.items()
    )
    heads = (
        Head("Joint answer", "to the items of a set", numeric=False),
        *([Head("Group", "the group of cases", numeric=False)] if grouped else []),
        *(
            Head(called(name), f"median ({level(facts.content.interval)} interval)")
            for name in facts.class_names
        ),
    )
    partial = any(len(one.classes) < len(facts.class_names) for one in _sets(facts))
    note = f"{NOTHING}: independent in this class, where the answers' probabilities multiply."
    return PageTable(
        "The probability of each joint answer in each class",
        heads,
        rows,
        (note,) if partial else (),
        folded=len(rows) > 12,
    )


def _sets(facts: Facts) -> tuple[ItemSet, ...]:
    return facts.posterior.model.item_sets


def _pair(facts: Facts, row: dict[str, Any]) -> str:
    texts = {item.name: item.text for item in facts.posterior.model.items}
    return f"{texts[row['item_1']]} and {texts[row['item_2']]}"


def _where(row: dict[str, Any]) -> str:
    group = f" of {row['group']}" if row.get("group") else ""
    return f"{called(row['latent_class'])}{group}"


def _odds(row: dict[str, Any]) -> str:
    """Return ``3.1 (1.2 to 9.4)``; what is far from 1 without places that mean nothing."""
    parts = [_ratio(float(row[end])) for end in ("median", "lower", "upper")]
    return f"{parts[0]} ({parts[1]} to {parts[2]})"


def _ratio(value: float) -> str:
    if value > 1000:
        return "above 1,000"
    if value < 0.001:
        return "below 0.001"
    return significant(value) if value < 100 else decimal(value, 0)
