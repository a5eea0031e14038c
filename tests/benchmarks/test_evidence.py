"""Time and error of the evidence: the 118 x 7 published table and simulated ones.

Not part of the test suite (a minute or more): ``pytest tests/benchmarks/test_evidence.py -s``.
"""

import csv
import time
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from bayeslca.assess.class_count.class_counts import class_counts
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.responses.responses import Responses

TABLE = Path(__file__).parents[1] / "references" / "carcinoma_raters_1977.csv"
SEED = 20261215


def published():
    with TABLE.open(encoding="utf-8") as file:
        head, *body = csv.reader(file)
    frame = pd.DataFrame([row for row in body if int(row[-1]) > 0], columns=head)
    frame[head[-1]] = frame[head[-1]].astype(int)
    return Responses.from_frame(frame, items=head[:-1], counts=head[-1])


def simulated(n):
    """Return answers of three kinds of cases to seven yes/no items."""
    rng = np.random.default_rng(SEED)
    probability = rng.choice([0.15, 0.85], size=(3, 7))
    kind = rng.choice(3, n, p=[0.5, 0.3, 0.2])
    answers = np.where(rng.random((n, 7)) < probability[kind], "yes", "no")
    names = [f"item{j}" for j in range(7)]
    return Responses.from_frame(pd.DataFrame(answers, columns=names), items=names)


@pytest.mark.parametrize(
    ("responses", "counts", "target"),
    [
        pytest.param(published, range(1, 7), 0.1, id="published 118 x 7"),
        pytest.param(lambda: simulated(300), range(1, 7), 0.1, id="300 x 7"),
        pytest.param(lambda: simulated(2500), range(2, 6), 0.3, id="2500 x 7"),
        pytest.param(lambda: simulated(20_000), range(2, 6), 0.3, id="20000 x 7"),
    ],
)
def test_error_and_time(responses, counts, target):
    answers = responses()
    begin = time.perf_counter()
    posteriors = {
        k: LatentClassModel(answers.items, k).sample(
            answers, seed=SEED, progress=False, max_sweeps=40_000
        )
        for k in counts
    }
    sampled = time.perf_counter()
    class_counts({k: posteriors[k] for k in list(counts)[:2]})  # compiled once before
    compiled = time.perf_counter()
    cpu = time.process_time()
    found = class_counts(posteriors)
    seconds, cpu = time.perf_counter() - compiled, time.process_time() - cpu
    print(
        f"\nsampling {sampled - begin:.1f} s, evidence {seconds:.1f} s (processor {cpu:.1f} s)\n"
        f"{found!r}"
    )
    reliable = found.table[found.table["reliable"]]
    assert (reliable["log_evidence_mcse"] < target).all()
    assert len(reliable) >= len(found.table) - 1
    assert cpu / len(counts) < 5.0  # processor time: steady on a busy machine
