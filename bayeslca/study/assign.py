"""Membership of new cases from a finished run."""

from __future__ import annotations

import textwrap
import warnings
from pathlib import Path
from typing import TYPE_CHECKING

from bayeslca.exceptions import BayesLCAWarning
from bayeslca.posterior.posterior import Posterior
from bayeslca.relate.placing import UNASSIGNED, PlacingRule, place_cases
from bayeslca.report.wording import called, counted, listed, listed_up_to, percent
from bayeslca.responses.item import Item, ItemSpec
from bayeslca.responses.responses import Responses
from bayeslca.study.load import Study, load_study
from bayeslca.study.placing import placing_rule
from bayeslca.study.results import open_results, write_text_aside

if TYPE_CHECKING:
    import pandas as pd

MOST_NAMED = 8
CAUTION = (
    "Membership describes cases under this model; it is uncertain and is no decision about anyone. "
    "Where it would decide about people or animals: check the model on cases like these whose "
    "class is known, compare its errors between the groups it would touch, let those who answer "
    "for the decision set the costs, and follow local rules and licensed practice."
)


def assign_new_cases(
    folder: Path,
    path: Path,
    output: Path,
    *,
    sheet: str | int | None = None,
    at_most: float | None = None,
    replace: bool = False,
) -> str:
    """Write the membership of new cases as CSV and say how surely they are placed.

    The new file is read with the finished study's own rules: its items and categories, merges,
    no-answer codes, case and group columns; its rule for placing cases holds, too.

    Parameters
    ----------
    folder : Path
        Results of a run.
    path : Path
        The new answers.
    output : Path
    sheet : str or int, optional
    at_most : float, optional
        Highest expected cost of placing a case, in place of the study's own.
    replace : bool
        Overwrite the output if it is there.

    Raises
    ------
    BayesLCAError
        When the results, the new answers, the rule or the output are not right.
    """
    results = open_results(folder)
    posterior = Posterior.load(results.main_fit)
    study = load_study(results.folder / "study.toml")
    rule = placing_rule(study) or PlacingRule()
    if at_most is not None:
        rule = PlacingRule(at_most, rule.costs)
    rule.matrix(posterior.model.class_names)  # refused before anything is read
    new = _read_alike(study, posterior, path, sheet)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", BayesLCAWarning)  # impossible cases are named below
        membership = posterior.assign(new, study.said.report.interval)
    placed = place_cases(posterior, new, at_most=rule.at_most, costs=rule.costs)
    table = membership.join(placed.drop(columns="case"))
    write_text_aside(output, table.to_csv(index=False), replace=replace)
    lines = [
        f"Wrote {output}: {counted(len(table), 'case')}.",
        _counts(table, posterior.model.class_names),
        *_named(table, membership.attrs["impossible_cases"], rule),
        CAUTION,
    ]
    return "\n".join(textwrap.fill(line, 79, break_on_hyphens=False) for line in lines)


def _counts(table: pd.DataFrame, class_names: tuple[str, ...]) -> str:
    counts = table["placed_in"].value_counts()
    parts = [f"{int(counts.get(name, 0)):,} in {called(name)}" for name in class_names]
    return f"Placed: {listed(parts)}; unassigned: {int(counts.get(UNASSIGNED, 0)):,}."


def _named(table: pd.DataFrame, impossible: tuple[str, ...], rule: PlacingRule) -> list[str]:
    """Name the cases that are unsure, and those whose answers no class allows."""
    left = [str(name) for name in table.loc[table["placed_in"] == UNASSIGNED, "case"]]
    unsure = [name for name in left if name not in impossible]
    out = []
    if unsure:
        why = (
            f"expected cost above {rule.at_most:g}"
            if rule.costs
            else f"most probable class below {percent(max(0.0, 1.0 - rule.at_most))}"
        )
        out.append(f"Too uncertain to place ({why}): {listed_up_to(unsure, MOST_NAMED)}.")
    if impossible:
        out.append(
            f"Answers that no class allows, so no membership: "
            f"{listed_up_to(impossible, MOST_NAMED)}. The model is certainly wrong for them."
        )
    return out


def _read_alike(
    study: Study, posterior: Posterior, path: Path, sheet: str | int | None
) -> Responses:
    """Read new cases as the study read its own, with the fitted model's categories."""
    answers = study.said.answers
    spreadsheet = path.suffix.lower() in {".xlsx", ".xlsm"}
    return Responses.read(
        path,
        items=[_spec(study, item) for item in posterior.model.items],
        case=answers.case,
        group=posterior.model.groups,
        no_answer=tuple(answers.no_answer),
        sheet=sheet if sheet is not None else (answers.sheet if spreadsheet else None),
        header_row=answers.header_row if path.suffix == Path(answers.file).suffix else 1,
    )


def _spec(study: Study, item: Item) -> ItemSpec:
    said = study.said.items.get(item.name)
    return ItemSpec(
        item.name,
        categories=item.categories,
        label=item.label,
        ordered=item.ordered,
        yes=item.yes,
        merge=dict(said.merge) if said else {},
        no_answer=tuple(said.no_answer) if said else (),
        fitted=True,
    )
