"""Items answered together against the exact posterior of a tiny table.

No source but arithmetic: every case's class, and every missing half of a pair, is written out;
given those, the joint answers of a class are one Dirichlet-multinomial. The model makes them of
margins and conditionals, so that nothing here is shared with it.
"""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest
from scipy.special import gammaln, logsumexp

from bayeslca import AnsweredTogether, Item, LatentClassModel, Responses
from bayeslca.assess.evidence.log_evidence import log_evidence
from bayeslca.model.compile import compile_units
from bayeslca.model.probabilities import log_unit_likelihood
from bayeslca.model.simulate import parameters_from

SEED = 20270102
MISSING = -1
ITEMS = tuple(Item(name, ("no", "yes"), yes="yes") for name in ("fees", "accounts", "meets"))
CLASSES = ("managed", "lapsed")
CASES = [
    (1, 1, 1), (1, MISSING, 1), (MISSING, 0, 0), (0, 0, MISSING), (1, 1, 0), (MISSING, 1, 1),
    (0, 1, 0),
]  # fmt: skip
MEETS = {"managed": (1.0, 4.0), "lapsed": (3.0, 1.0)}  # Dirichlet parameters of no, yes
STATEMENTS = ("P(meets=yes | managed) ~ Beta(4, 1)", "P(meets=yes | lapsed) ~ Beta(1, 3)")
NUMBERS = (2.0, 0.7, 1.0, 3.0)


def responses() -> Responses:
    return Responses(
        items=ITEMS,
        codes=np.array(CASES, dtype=np.int16),
        counts=np.ones(len(CASES), dtype=np.int64),
    )


def log_beta(a: np.ndarray) -> float:
    return float(gammaln(a).sum() - gammaln(a.sum()))


def exact(joint: dict[str, np.ndarray | None]) -> tuple[float, dict[str, np.ndarray]]:
    """Log evidence, and posterior means of prevalences and joint answers (None: independent)."""
    logs, means = [], []
    halves = [[(case[0],) if case[0] >= 0 else (0, 1), (case[1],) if case[1] >= 0 else (0, 1)]
              for case in CASES]  # fmt: skip
    for classes in product(range(2), repeat=len(CASES)):
        for filled in product(*(list(product(*half)) for half in halves)):
            # An independent class leaves a missing answer out: writing it out sums to the same.
            total, mean = (
                log_beta(np.bincount(classes, minlength=2) + 1.0) - log_beta(np.ones(2)),
                {},
            )
            mean["prevalence"] = (np.bincount(classes, minlength=2) + 1.0) / (len(CASES) + 2)
            for k, name in enumerate(CLASSES):
                mine = [i for i, c in enumerate(classes) if c == k]
                meets = np.bincount([CASES[i][2] for i in mine if CASES[i][2] >= 0], minlength=2)
                prior = np.array(MEETS[name])
                total += log_beta(prior + meets) - log_beta(prior)
                pairs = np.zeros((2, 2))
                for i in mine:
                    pairs[filled[i]] += 1
                a = joint[name]
                if a is None:
                    for counts in (pairs.sum(axis=1), pairs.sum(axis=0)):
                        total += log_beta(1.0 + counts) - log_beta(np.ones(2))
                else:
                    total += log_beta((a + pairs).ravel()) - log_beta(a.ravel())
                    mean[name] = (a + pairs) / (a + pairs).sum()
            logs.append(total)
            means.append(mean)
    evidence = float(logsumexp(logs))
    weight = np.exp(np.array(logs) - evidence)
    return evidence, {
        name: np.tensordot(weight, np.array([mean[name] for mean in means]), axes=1)
        for name in means[0]
    }


MODELS = {
    "in one class": (
        [AnsweredTogether(["fees", "accounts"], ["managed"])],
        {"managed": np.full((2, 2), 0.5), "lapsed": None},
    ),
    "in both, a number for each": (
        [
            AnsweredTogether(["fees", "accounts"], ["managed"], prior=NUMBERS),
            AnsweredTogether(["fees", "accounts"], ["lapsed"], prior=1.0),
        ],
        {"managed": np.reshape(NUMBERS, (2, 2)), "lapsed": np.ones((2, 2))},
    ),
}


@pytest.mark.parametrize("which", MODELS)
def test_gibbs_and_the_evidence_have_the_exact_posterior(which: str) -> None:
    together, joint = MODELS[which]
    evidence, means = exact(joint)
    model = LatentClassModel(ITEMS, CLASSES, STATEMENTS, answered_together=together)
    posterior = model.sample(responses(), seed=SEED, progress=False, draws=2000, ess=2000)
    frame = posterior.prevalence()
    z = (frame["mean"] - means["prevalence"]) / frame["mcse"]
    assert np.all(np.abs(z) < 4)
    answers = posterior.joint_answers().set_index("latent_class")
    for name, mean in means.items():
        if name != "prevalence":
            z = (answers.loc[name, "mean"] - mean.ravel()) / answers.loc[name, "mcse"]
            assert np.all(np.abs(z) < 4.5), z
    found = log_evidence(posterior, seed=SEED)
    assert found.reliable, found.reason
    assert abs(found.log_evidence - evidence) < 4 * found.mcse + 1e-3


def test_the_likelihood_sums_over_missing_halves() -> None:
    together, _ = MODELS["in one class"]
    model = LatentClassModel(ITEMS, CLASSES, STATEMENTS, answered_together=together)
    joint = np.array([[0.4, 0.1], [0.15, 0.35]])
    lapsed, meets = {"fees": 0.3, "accounts": 0.2}, {"managed": 0.8, "lapsed": 0.1}
    parameters = parameters_from(
        model,
        [0.6, 0.4],
        {name: {"lapsed": p} for name, p in lapsed.items()} | {"meets": meets},
        {("fees", "accounts"): {"managed": joint}},
    )
    units = model.units(responses())
    found = log_unit_likelihood(
        model.table, compile_units(model.table, units), parameters.elements, parameters.prevalence
    )[units.unit_of_row]

    def answered(p: float, code: int) -> float:
        return 1.0 if code == MISSING else (p if code else 1 - p)

    for case, value in zip(CASES, found, strict=True):
        at = tuple(slice(None) if code == MISSING else code for code in case[:2])
        managed = 0.6 * joint[at].sum() * answered(0.8, case[2])
        other = 0.4 * answered(0.3, case[0]) * answered(0.2, case[1]) * answered(0.1, case[2])
        assert value == pytest.approx(np.log(managed + other), rel=1e-12)
