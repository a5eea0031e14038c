"""Membership of new cases from a finished run."""

from __future__ import annotations

import textwrap
from pathlib import Path

from bayeslca.posterior.posterior import Posterior
from bayeslca.report.wording import counted
from bayeslca.responses.item import Item, ItemSpec
from bayeslca.responses.responses import Responses
from bayeslca.study.load import Study, load_study
from bayeslca.study.results import open_results, write_text_aside

CAUTION = (
    "Membership describes cases under this model; it is uncertain and is no decision about anyone."
)


def assign_new_cases(
    folder: Path,
    path: Path,
    output: Path,
    *,
    sheet: str | int | None = None,
    replace: bool = False,
) -> str:
    """Write the membership of new cases as CSV and say how surely they are placed.

    The new file is read with the finished study's own rules: its items and categories, merges,
    no-answer codes, case and group columns.

    Raises
    ------
    BayesLCAError
        When the results, the new answers or the output are not right.
    """
    results = open_results(folder)
    posterior = Posterior.load(results.main_fit)
    study = load_study(results.folder / "study.toml")
    new = _read_alike(study, posterior, path, sheet)
    table = posterior.assign(new)
    write_text_aside(output, table.to_csv(index=False), replace=replace)
    sure = int((table["modal_probability"] >= 0.9).sum())
    return "\n".join(
        [
            f"Wrote {output}: {counted(len(table), 'case')}.",
            f"Placed in one class with a probability of at least 90 %: {sure:,}.",
            textwrap.fill(CAUTION, 79),
        ]
    )


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
