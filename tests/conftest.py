"""What tests of several rooms share."""

from __future__ import annotations

import os
from pathlib import Path

import numpy as np
import pytest
from hypothesis import settings

# The same examples on every run and machine: a red suite means a change, not luck. To search
# further, run with HYPOTHESIS_PROFILE=search.
settings.register_profile("suite", derandomize=True, deadline=None)
settings.register_profile("search", max_examples=2000, deadline=None)
settings.load_profile(os.environ.get("HYPOTHESIS_PROFILE", "suite"))


@pytest.fixture
def messy(tmp_path: Path) -> Path:
    """Write the spreadsheet of an evaluator in a hurry: 118 rows, and return its path.

    Spelling variants, don't-knows, an id column, a free-text column, empty cells.
    """
    import pandas as pd

    rng = np.random.default_rng(118)
    managed = rng.random(118) < 0.4
    yes_words = ["yes", "Yes", "YES", "yes "]
    no_words = ["no", "No", "no"]

    def answers(high: float, low: float) -> list[object]:
        out: list[object] = []
        for is_managed in managed:
            says_yes = rng.random() < (high if is_managed else low)
            out.append(str(rng.choice(yes_words if says_yes else no_words)))
        for row in rng.choice(118, size=4, replace=False):
            out[row] = None
        for row in rng.choice(118, size=3, replace=False):
            out[row] = "don't know"
        return out

    frame = pd.DataFrame(
        {
            "Respondent ID": [f"R-{1000 + i}" for i in range(118)],
            "Pays fees?": answers(0.9, 0.2),
            "Keeps accounts": answers(0.8, 0.1),
            "Has spare parts": answers(0.7, 0.2),
            "Meets": answers(0.9, 0.3),
            "Remarks": [
                f"visited on day {i}, {'the pump was' if i % 2 else 'nobody was'} there"
                for i in range(118)
            ],
            "Water test": [99 if i % 17 == 0 else int(m) for i, m in enumerate(managed)],
        }
    )
    path = tmp_path / "messy.xlsx"
    frame.to_excel(path, index=False)
    return path
