"""How surely cases are placed: membership, assignment error and separation."""

from __future__ import annotations

from bayeslca.relate.placing import UNASSIGNED, PlacingRule
from bayeslca.report.blocks import (
    Block,
    Head,
    PageTable,
    Paragraph,
    Picture,
    Section,
    Subheading,
)
from bayeslca.report.facts import Facts
from bayeslca.report.figures import WIDTH, draw
from bayeslca.report.plots import plot_membership
from bayeslca.report.wording import (
    NOTHING,
    called,
    counted,
    decimal,
    level,
    listed,
    number_interval,
    percent,
    percent_interval,
    whole,
)

ANCHOR, HEADING = "membership", "How surely cases are placed"
STEADY = 0.95
CHECK_FIRST = (
    "Placing describes cases under this model. Before it decides about anyone: those who answer "
    "for the decision set the costs; the model is checked on cases like these whose class is "
    "known; errors are compared between the groups of people that it would touch; local rules and "
    "licensed practice come first."
)


def membership_section(facts: Facts) -> Section:
    """Return the section on membership."""
    if len(facts.class_names) == 1:
        text = "With a single class there is nothing to place: every case is in it."
        return Section(ANCHOR, HEADING, (Paragraph(text),))
    figure = draw(
        "membership",
        lambda drawing: plot_membership(facts.posterior, ax=drawing.subplots()),
        size=(WIDTH, 1.0 + 0.7 * len(facts.class_names)),
        caption=(
            "How many cases are placed how surely, by their most probable class: the further to "
            "the right, the surer. The bars of each class have a height of their own."
        ),
        alt=_in_words(facts),
    )
    blocks: list[Block] = [
        Paragraph(_in_words(facts)),
        Picture(figure),
        _placed_table(facts),
        Paragraph(separation_in_words(facts)),
        _assignment_table(facts),
        *_placing(facts),
        Paragraph(_where(facts)),
    ]
    if facts.content.show_cases:
        blocks.append(_cases_table(facts))
    return Section(ANCHOR, HEADING, tuple(blocks))


def separation_in_words(facts: Facts) -> str:
    """Return the separation of the classes with its interval, in a sentence."""
    frame = facts.posterior.separation(interval=facts.content.interval)
    row = frame.iloc[0]
    text = number_interval(float(row["median"]), float(row["lower"]), float(row["upper"]))
    return (
        f"The separation of the classes (relative entropy) is {text}; 1 would place every case "
        "surely, 0 would leave it to chance."
    )


def _in_words(facts: Facts) -> str:
    placed = facts.placement
    total = counted(placed.n_cases, "case")
    sure, unsure = placed.n_at_least(0.9), placed.n_cases - placed.n_at_least(0.6)
    most = listed(
        [
            f"{whole(number)} in {called(name)}"
            for number, name in zip(placed.placed_in(), facts.class_names, strict=True)
        ]
    )
    text = (
        f"Of {total}, {_count(sure)} have a most probable class of 90 % or more, and "
        f"{_count(unsure)} one below 60 %; the average is {percent(placed.mean_highest)}. "
    )
    return text + f"By most probable class, there are {most}."


def _count(number: int) -> str:
    return whole(number) if number else "none"


def _placed_table(facts: Facts) -> PageTable:
    placed = facts.placement
    rows = []
    for k, (name, share) in enumerate(zip(facts.class_names, facts.overall, strict=True)):
        mine = placed.modal == k
        count, highest = placed.count[mine], placed.highest[mine]
        total = int(count.sum())
        mean = float((highest * count).sum() / total) if total else float("nan")
        rows.append(
            (
                called(name),
                whole(total),
                whole(share.median * facts.n_cases),
                percent(mean),
                whole(int(count[highest >= 0.9].sum())),
                whole(int(count[highest < 0.6].sum())),
            )
        )
    heads = (
        Head("Class", "the most probable class of the cases", numeric=False),
        Head("Cases placed", "cases whose most probable class it is"),
        Head("Cases expected", "its share times all cases"),
        Head("Average probability", "of this class, over the cases placed in it"),
        Head("Placed surely", "cases with 90 % or more"),
        Head("Placed unsurely", "cases with less than 60 %"),
    )
    return PageTable("Cases by their most probable class", heads, tuple(rows))


def _assignment_table(facts: Facts) -> PageTable:
    frame = facts.posterior.assignment_error(interval=facts.content.interval)
    cells = {
        (str(row["latent_class"]), str(row["assigned_class"])): row
        for row in frame.to_dict("records")
    }
    rows = tuple(
        (
            called(truth),
            *(
                percent_interval(row["median"], row["lower"], row["upper"])
                for row in (cells[(truth, placed)] for placed in facts.class_names)
            ),
        )
        for truth in facts.class_names
    )
    heads = (
        Head("Of the cases of", "the class that they are in", numeric=False),
        *(
            Head(
                f"placed in {called(name)}",
                f"share, median ({level(facts.content.interval)} interval)",
            )
            for name in facts.class_names
        ),
    )
    return PageTable(
        "What happens when every case is put into its most probable class", heads, rows
    )


def _placing(facts: Facts) -> list[Block]:
    """Return how many cases the study's rule places, and how many it leaves unassigned."""
    rule, placed = facts.content.placing_rule, facts.content.placed
    if rule is None or placed is None:
        return []
    counts = facts.content.responses.counts
    rows = []
    for name in (*facts.class_names, UNASSIGNED):
        mine = (placed["placed_in"] == name).to_numpy()
        cost = float((counts[mine] * placed["expected_cost"].to_numpy()[mine]).sum())
        rows.append(
            (
                called(name) if name != UNASSIGNED else name,
                whole(int(counts[mine].sum())),
                NOTHING if name == UNASSIGNED else decimal(cost),
                whole(int(counts[mine & (placed["steady"] < STEADY).to_numpy()].sum())),
            )
        )
    wrong = "expected cost" if rule.costs else "cases expected to be wrong"
    heads = (
        Head("Placed in", numeric=False),
        Head("Cases"),
        Head(wrong[0].upper() + wrong[1:], "added up over these cases"),
        Head("Unsteady", "the rule says otherwise in more than 5 % of posterior draws"),
    )
    return [
        Subheading("Cases placed by the study's rule"),
        Paragraph(_rule_in_words(rule)),
        PageTable("Cases placed, and left unassigned", heads, tuple(rows)),
        Paragraph(CHECK_FIRST),
    ]


def _rule_in_words(rule: PlacingRule) -> str:
    if not rule.costs:
        least = percent(max(0.0, 1.0 - rule.at_most))
        return (
            f"A case is placed in its most probable class when that has a probability of at least "
            f"{least}, and is left unassigned otherwise."
        )
    stated = [
        f"{cost:g} for {called(truth)} placed in {called(placed)}"
        for truth, row in rule.costs.items()
        for placed, cost in row.items()
    ]
    return (
        "A case is placed where the expected cost is lowest, and left unassigned when that is "
        f"above {rule.at_most:g} (Chow 1970). The costs: {listed(stated)}; any other "
        "wrong class costs 1."
    )


def _where(facts: Facts) -> str:
    text = (
        "The membership of each case stands in membership.csv beside this page. Do not treat the "
        "most probable class as if it had been observed: relations of class with other variables "
        "come out too weak when it is."
    )
    drawn = facts.content.plausible_values
    if drawn is not None:
        text += (
            f" For other programs, {counted(drawn.shape[1] - 2, 'drawn class', 'drawn classes')} "
            f"of each case stand in plausible_values.csv, {drawn['made'].iloc[0]}."
        )
    if not facts.content.show_cases:
        text += " No single case is shown on this page; the study can ask for it (show_cases)."
    return text


def _cases_table(facts: Facts) -> PageTable:
    frame = facts.posterior.membership(interval=facts.content.interval)
    rows = tuple(
        (str(row["case"]), *(percent(row[f"probability_{name}"]) for name in facts.class_names))
        for row in frame.to_dict("records")
    )
    heads = (
        Head("Case", "its name in the data", numeric=False),
        *(Head(called(name), "probability of the class") for name in facts.class_names),
    )
    return PageTable("The membership of each case", heads, rows, folded=True)
