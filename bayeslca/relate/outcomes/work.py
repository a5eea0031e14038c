"""What all ways of relating an outcome to class need, each made once."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.exceptions import ModelError
from bayeslca.findings import Finding
from bayeslca.model.probabilities import membership
from bayeslca.relate.case_units import CaseUnits, case_units
from bayeslca.relate.error_matrix import Placement
from bayeslca.relate.outcomes.checks import distribution, outcome_checks, replicated_outcomes
from bayeslca.relate.outcomes.column import Outcome
from bayeslca.relate.outcomes.cut import cut_draws
from bayeslca.relate.outcomes.draws import OutcomeDraws
from bayeslca.relate.outcomes.model import CountModel, OutcomeModel, outcome_model
from bayeslca.relate.outcomes.overdispersion import overdispersion
from bayeslca.relate.outcomes.three_steps import (
    FIRST_STEP_DRAWS,
    Correction,
    ThreeSteps,
    three_steps,
)

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.posterior.posterior import Posterior
    from bayeslca.responses.responses import Responses


OVERDISPERSED = 0.05
"""Counts vary too much for a Poisson when its replicates do so less often than this."""


def read_covariates(
    responses: Responses, data: Any, adjusted_for: str | None, **how_to_read: Any
) -> tuple[Floats | None, tuple[str, ...], tuple[Finding, ...]]:
    """Return the covariates' columns (N, p), nan where missing, their names, and findings."""
    if adjusted_for is None:
        return None, (), ()
    from bayeslca.relate.case_table import read_case_table
    from bayeslca.relate.predictors.covariates import design_of
    from bayeslca.relate.predictors.formula import read_formula

    formula = read_formula(adjusted_for)
    design = design_of(read_case_table(responses, data, formula.columns, **how_to_read), formula)
    out = np.full((responses.n_rows, design.matrix.shape[1] - 1), np.nan)
    out[design.used] = design.matrix[:, 1:]
    noticed = tuple(one for one in design.findings if one.kind != "covariates_missing")
    return out, tuple(column.name for column in design.columns[1:]), noticed


@dataclass(frozen=True, eq=False)
class OutcomeWork:
    """What all ways need of a measurement model and an outcome."""

    posterior: Posterior
    outcome: Outcome
    covariate: Floats | None
    equal_spread: bool
    seed: int | None
    threads: int | None

    def seed_of(self, part: int) -> np.random.SeedSequence:
        """Return the seed of one part of the work: it does not depend on which others are done."""
        return np.random.SeedSequence(self.seed, spawn_key=(part,))

    @cached_property
    def group(self) -> Ints | None:
        """Group of each case; None when the model has none."""
        if self.posterior.model.groups is None:
            return None
        return np.asarray(self.posterior.responses.group_codes, dtype=np.int64)

    @cached_property
    def cases(self) -> CaseUnits:
        """A unit for every case."""
        n = self.posterior.responses.n_rows
        group = np.zeros(n, dtype=np.int64) if self.group is None else self.group
        return case_units(
            self.posterior.model, self.posterior.responses, group, apart=np.arange(float(n))
        )

    def model(self, count_model: CountModel) -> OutcomeModel:
        """Return the outcome's model."""
        return outcome_model(
            self.outcome.kind,
            self.outcome.value,
            self.posterior.model.n_classes,
            n_levels=len(self.outcome.levels) if self.outcome.kind == "ordered" else 0,
            covariate=self.covariate,
            count_model=count_model,
            equal_spread=self.equal_spread,
        )

    def cut(self, model: OutcomeModel, draws: int) -> OutcomeDraws:
        """Draw the outcome's parameters by the cut."""
        return cut_draws(
            self.posterior, model, self.cases, draws=draws, seed=self.seed_of(2),
            threads=self.threads,
        )  # fmt: skip

    @cached_property
    def membership_draws(self) -> Floats:
        """P(class | answers) of each case at some draws, shape (draw, N, K)."""
        draws, table = self.posterior.draws, self.posterior.table
        elements = draws.flat_elements
        prevalence = draws.flat_prevalence
        most = max(FIRST_STEP_DRAWS, min(1000, 40_000_000 // (elements.shape[1] + 1)))
        size = self.cases.units.n_units * table.n_classes
        most = int(np.clip(20_000_000 // size, FIRST_STEP_DRAWS, most))
        at = np.linspace(0, len(elements) - 1, min(most, len(elements))).round().astype(int)
        found = membership(table, self.cases.units, elements[at], prevalence[at])
        return np.asarray(found[:, self.cases.unit_of_case])

    @cached_property
    def membership(self) -> Floats:
        """P(class | answers) of each case, shape (N, K)."""
        return np.asarray(self.membership_draws.mean(axis=0))

    def three_steps(
        self, model: OutcomeModel, corrections: Sequence[Correction], placement: Placement
    ) -> tuple[dict[str, ThreeSteps | None], dict[str, str]]:
        """Return the estimates by correction, and why there is none where there is none."""
        n = len(self.membership_draws)
        at = np.linspace(0, n - 1, min(FIRST_STEP_DRAWS, n)).round().astype(int)
        steps: dict[str, ThreeSteps | None] = {}
        stopped: dict[str, str] = {}
        for correction in corrections:
            try:
                steps[correction] = three_steps(
                    model,
                    self.membership,
                    correction=correction,
                    class_names=self.posterior.model.class_names,
                    membership_draws=self.membership_draws[at],
                    by=placement,
                    group=self.group,
                )
            except ModelError as error:
                steps[correction], stopped[correction] = None, str(error)
        return steps, stopped

    def count_model(self) -> tuple[CountModel, tuple[Finding, ...]]:
        """Choose between Poisson and negative binomial by how counts vary within classes."""
        seen = self.outcome.seen
        rng = np.random.default_rng(self.seed_of(3))
        found = overdispersion(self.outcome.value[seen], self.membership[seen], rng)
        is_over = found.p < OVERDISPERSED
        p = "below 0.01" if found.p < 0.01 else f"{found.p:.2f}"
        finding = Finding(
            kind="counts_overdispersed" if is_over else "counts_poisson",
            level="note",
            message=f"{self.outcome.text} varies {found.ratio:.2g} times as much within classes as "
            f"Poisson counts would (these: {found.lower:.2g} to {found.upper:.2g}; p {p}), so "
            f"{'the negative binomial' if is_over else 'the Poisson'} is used.",
            about=(self.outcome.name,),
            value=found.ratio,
        )
        return ("negative_binomial" if is_over else "poisson"), (finding,)

    def checks(
        self, model: OutcomeModel, drawn: Mapping[str, OutcomeDraws], interval: float
    ) -> tuple[pd.DataFrame, pd.DataFrame]:
        """Return the predictive checks of all ways that have draws, and the distributions."""
        import pandas as pd

        seed = int(self.seed_of(5).generate_state(1)[0])
        names = self.posterior.model.class_names
        frames: tuple[list[pd.DataFrame], list[pd.DataFrame]] = ([], [])
        for way, one in drawn.items():
            replicates = replicated_outcomes(self.posterior, model, self.cases, one, seed=seed)
            both = (
                outcome_checks(self.outcome, model, replicates, self.membership, names, interval),
                distribution(self.outcome, model, replicates, interval),
            )
            for frame, frames_of_kind in zip(both, frames, strict=True):
                frame.insert(0, "way", way)
                frames_of_kind.append(frame)
        nothing = pd.DataFrame({"way": pd.Series(dtype=object)})
        joined = [pd.concat(kind, ignore_index=True) if kind else nothing for kind in frames]
        for frame in joined:
            frame.attrs["interval"] = interval
        return joined[0], joined[1]
