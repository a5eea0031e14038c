"""What the columns of a messy spreadsheet look like, and that the proposals read it."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pyreadstat
import pytest

from bayeslca.responses.columns import ColumnReport, describe_columns
from bayeslca.responses.item import ItemSpec
from bayeslca.responses.reading import read_table
from bayeslca.responses.responses import Responses


@pytest.fixture(scope="module")
def messy(tmp_path_factory: pytest.TempPathFactory) -> Path:
    rng = np.random.default_rng(118)
    n = 118
    fees = ["yes", "Yes", "no", "No ", "Y", "don't know", None]
    frame = pd.DataFrame(
        {
            "committee": [f"WP-{i:03d}" for i in range(n)],
            "district": rng.choice(["north", "south", "hills"], n),
            "fees": rng.choice(
                np.array(fees, dtype=object), n, p=[0.3, 0.2, 0.2, 0.1, 0.1, 0.05, 0.05]
            ),
            "accounts": rng.choice(["Yes", "No", "refused"], n),
            "meets": rng.choice([0, 1, 99], n, p=[0.5, 0.45, 0.05]),
            "trust": rng.choice([1, 2, 3, 4, 5, 9], n),
            "often": rng.choice(["never", "Sometimes", "always"], n),
            "km": rng.gamma(2, 10, n).round(1),
            "age": rng.integers(1, 30, n),
            "remarks": rng.choice(
                np.array([*(f"the pump was out for {i} days" for i in range(90)), None], object), n
            ),
            "visited": pd.Timestamp("2025-03-01") + pd.to_timedelta(rng.integers(0, 30, n), "D"),
            "empty": None,
            "country": "here",
            "serial": range(1, n + 1),
        }
    )
    path = tmp_path_factory.mktemp("messy") / "committees.xlsx"
    frame.to_excel(path, index=False)
    return path


@pytest.fixture(scope="module")
def reports(messy: Path) -> dict[str, ColumnReport]:
    return {report.name: report for report in describe_columns(read_table(messy))}


def test_kinds(reports: dict[str, ColumnReport]) -> None:
    assert {name: report.kind for name, report in reports.items()} == {
        "committee": "id",
        "district": "group",
        "fees": "item",
        "accounts": "item",
        "meets": "item",
        "trust": "item",
        "often": "item",
        "km": "number",
        "age": "number",
        "remarks": "free_text",
        "visited": "date",
        "empty": "empty",
        "country": "constant",
        "serial": "id",
    }
    assert all(report.reason for report in reports.values())


def test_proposals(reports: dict[str, ColumnReport]) -> None:
    fees = reports["fees"]
    assert fees.merge == {"yes": ("Yes", "Y"), "no": ("No ",)}
    assert fees.no_answer == ("don't know",)
    assert fees.reason == "2 different answers (of 6 different values)"
    assert (fees.categories, fees.yes, fees.order_rule) == (("no", "yes"), "yes", "known pair")
    assert fees.n_missing + sum(fees.values.values()) == 118
    assert reports["meets"].no_answer == ("99",)
    assert (reports["trust"].no_answer, reports["trust"].ordered) == (("9",), True)
    assert reports["often"].categories == ("never", "Sometimes", "always")
    assert len(reports["committee"].values) == 12
    assert reports["committee"].n_values == 118


def test_proposals_read_the_file(messy: Path, reports: dict[str, ColumnReport]) -> None:
    items = [
        ItemSpec(
            report.name,
            categories=report.categories,
            ordered=report.ordered,
            yes=report.yes,
            merge=report.merge,
            no_answer=report.no_answer,
        )
        for report in reports.values()
        if report.kind == "item"
    ]
    responses = Responses.read(messy, items=items, case="committee", group="district")
    assert responses.n_cases == 118
    assert [item.n_categories for item in responses.items] == [2, 2, 2, 5, 3]
    missing = responses.summary().groupby("item", sort=False)["missing"].first()
    for name, n in missing.items():
        report = reports[str(name)]
        assert n == report.n_missing + sum(report.values[silent] for silent in report.no_answer)


def test_labelled_columns_and_counts(tmp_path: Path) -> None:
    frame = pd.DataFrame({"q1": [1.0, 2.0, 8.0, 1.0], "n": [3.0, 1.0, 4.0, 12.0]})
    pyreadstat.write_sav(
        frame,
        tmp_path / "a.sav",
        column_labels=["Collects fees", "Cases"],
        variable_value_labels={"q1": {1.0: "Yes", 2.0: "No", 8.0: "Refused"}},
    )
    q1, n = describe_columns(read_table(tmp_path / "a.sav"))
    assert (q1.kind, q1.label, q1.no_answer) == ("item", "Collects fees", ("Refused",))
    assert q1.categories == ("Yes", "No")  # the file's order
    assert q1.yes == "Yes"
    assert n.kind == "count"
