"""What a study file may say: its sections, keys and their meaning.

The file is TOML and reads like the study's protocol. Every section is one class here, every key
one field; ``bayeslca.study.load`` turns what pydantic finds into messages with file and line.
"""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import (
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    StrictBool,
    field_validator,
    model_validator,
)

from bayeslca.exceptions import near_names


def _as_text(value: Any) -> Any:
    """Let whole numbers and truth values stand for category names, as TOML writes them."""
    if isinstance(value, bool):
        return "true" if value else "false"
    return str(value) if isinstance(value, int) else value


Text = Annotated[str, BeforeValidator(_as_text)]
"""A category or a code: text, or a whole number read as its digits."""


OTHER_PRIORS = ("half as strong", "twice as strong", "uniform", "Jeffreys")
"""Names of `bayeslca.model.alternative_priors.ALTERNATIVES`, which a study file may ask for."""


class _Section(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, strict=False)


class StudySection(_Section):
    """What the study is about."""

    title: str = "Latent class study"
    question: str = ""
    diagnostic: StrictBool = False


class AnswersSection(_Section):
    """Where the answers are and how to read them."""

    file: str
    items: list[str] = Field(min_length=1)
    sheet: str | int | None = None
    header_row: int = Field(default=1, ge=1)
    encoding: str | None = None
    separator: str | None = None
    keep_only: dict[str, list[Text]] = {}
    case: str | None = None
    group: str | None = None
    count: str | None = None
    weight: str | None = None
    cluster: str | None = None
    stratum: str | None = None
    merge_lone_strata: StrictBool = False
    no_answer: list[Text] = []

    @field_validator("items")
    @classmethod
    def _each_once(cls, items: list[str]) -> list[str]:
        repeated = sorted({name for name in items if items.count(name) > 1})
        if repeated:
            msg = f"names {repeated[0]!r} more than once; name each item once"
            raise ValueError(msg)
        return items


class ItemSection(_Section):
    """What is said of one item."""

    label: str = ""
    categories: list[Text] | None = None
    ordered: StrictBool = False
    yes: Text | None = None
    merge: dict[str, list[Text]] = {}
    no_answer: list[Text] = []


class SourcedStatement(_Section):
    """A statement with the place it comes from."""

    statement: str
    source: str


class TogetherSection(_Section):
    """Items that are answered together, in all classes or in some."""

    items: list[str]
    classes: list[str] | None = None
    prior: float | list[float] | None = None


class ModelSection(_Section):
    """The classes and what is assumed about them."""

    classes: int | list[str] | None = None
    chosen_because: str = ""
    statements: list[str | SourcedStatement] = []
    free_by_group: StrictBool | list[str] = False
    pooled: StrictBool = False
    spread_prior: tuple[
        Annotated[float, Field(gt=0, lt=1e6)], Annotated[float, Field(gt=0, lt=1e6)]
    ] = (1.0, 1.0)
    answered_together: list[list[str] | TogetherSection] = []

    @field_validator("classes")
    @classmethod
    def _at_least_one(cls, classes: int | list[str] | None) -> int | list[str] | None:
        if classes == [] or (isinstance(classes, int) and classes < 1):
            msg = "must be a number from 1 up, or a list of names"
            raise ValueError(msg)
        return classes


class ClassCountSection(_Section):
    """Which numbers of classes are compared."""

    compare: list[Annotated[int, Field(ge=1, le=20)]] = [1, 2, 3, 4, 5, 6]
    prior: Literal["uniform"] | dict[str, float] = "uniform"
    also_under: list[Literal["half as strong", "twice as strong", "uniform", "Jeffreys"]] = []
    together: StrictBool = True
    exact: StrictBool | None = None
    folds: int = Field(default=0, ge=0, le=1000)

    @field_validator("folds")
    @classmethod
    def _none_or_some(cls, folds: int) -> int:
        if folds == 1:
            msg = "must be 0 (none) or a number from 2; 10 is usual"
            raise ValueError(msg)
        return folds

    @field_validator("compare")
    @classmethod
    def _each_once(cls, compare: list[int]) -> list[int]:
        if len(set(compare)) != len(compare):
            msg = "names a number of classes more than once"
            raise ValueError(msg)
        return sorted(compare)

    @model_validator(mode="after")
    def _prior_is_a_distribution(self) -> ClassCountSection:
        if isinstance(self.prior, str):
            return self
        compared, given = [str(n) for n in self.compare], list(self.prior)
        strange = [name for name in given if name not in compared]
        missing = [name for name in compared if name not in given]
        what = ""
        if strange:
            what = f"names {strange[0]!r}, which compare does not list"
        elif missing:
            what = f"says nothing of {missing[0]} classes; write {missing[0]} = 0 to rule it out"
        elif any(not weight >= 0 for weight in self.prior.values()):
            what = "has a probability below 0, or one that is no number"
        elif abs(sum(self.prior.values()) - 1.0) > 1e-6:
            what = f"adds up to {sum(self.prior.values()):g}, not to 1"
        if what:
            msg = f"prior {what}"
            raise ValueError(msg)
        return self

    @property
    def prior_on_count(self) -> dict[int, float] | None:
        """The prior probability of each number of classes; None when all are alike."""
        if isinstance(self.prior, str):
            return None
        return {int(name): weight for name, weight in self.prior.items()}


class GroupsSection(_Section):
    """What is asked about the groups."""

    compare_free: StrictBool = False
    compare_pooled: StrictBool = False


class HypothesisSection(_Section):
    """One claim of the theory, and what it says of probabilities."""

    claim: str
    statements: list[str] = Field(min_length=1)
    planned: StrictBool = False
    rivals: str = ""
    weight: float = Field(default=1.0, gt=0)


class OutcomeSection(_Section):
    """One outcome that may follow from class."""

    column: str
    kind: Literal["numeric", "binary", "count", "ordered"]
    label: str = ""
    file: str | None = None
    adjusted_for: str = ""
    levels: list[Text] | None = None
    yes: Text | None = None
    no_answer: list[Text] = []
    count_model: Literal["check", "poisson", "negative_binomial"] = "check"
    spread: Literal["by_class", "equal"] = "by_class"
    ways: list[Literal["joint", "cut", "three_steps"]] = ["joint", "cut", "three_steps"]
    orders: list[str] = []


class FitSection(_Section):
    """Whether the model is checked against the answers, and how closely."""

    check: StrictBool = True
    calibrate: int = Field(default=0, ge=0, le=10_000)
    influence: StrictBool = True


class PriorsSection(_Section):
    """Whether it is looked at what the priors do, and which others are tried."""

    sensitivity: StrictBool = True
    refit: list[str] | None = None

    @field_validator("refit")
    @classmethod
    def _known(cls, refit: list[str] | None) -> list[str] | None:
        unknown = [name for name in refit or [] if name not in OTHER_PRIORS]
        if unknown:
            msg = (
                f"has {unknown[0]!r}{near_names(unknown[0], OTHER_PRIORS)}; take some of "
                f"{', '.join(OTHER_PRIORS)}"
            )
            raise ValueError(msg)
        return refit


class AssignmentSection(_Section):
    """When a case is placed in a class, and whether classes are drawn for other programs."""

    at_most: float = Field(default=0.2, ge=0, allow_inf_nan=False)
    costs: dict[str, dict[str, Annotated[float, Field(ge=0, allow_inf_nan=False)]]] = {}
    plausible_values: int = Field(default=0, ge=0, le=10_000)


class PredictorsSection(_Section):
    """What class is regressed on, and how."""

    formula: str
    file: str | None = None
    case: str | None = None
    categories: list[str] = []
    no_answer: list[Text] = []
    missing: Literal["leave_out", "refuse"] = "leave_out"
    against: str | None = None
    ways: list[Literal["joint", "cut", "three_steps"]] = Field(
        default=["joint", "cut", "three_steps"], min_length=1
    )
    correction: Literal["fixed_error_likelihood", "inverse_error_matrix"] = "fixed_error_likelihood"
    prior_scale: float = Field(default=1.5, gt=0, allow_inf_nan=False)


class MaximumLikelihoodSection(_Section):
    """Maximum likelihood beside the posterior, for readers who ask for it."""

    starting_points: int = Field(default=100, ge=1, le=10_000)
    bootstrap: int = Field(default=0, ge=0, le=100_000)


class SamplingSection(_Section):
    """How the posterior is computed."""

    seed: int = Field(default=1, ge=0)
    sampler: Literal["auto", "gibbs", "nuts"] = "auto"
    chains: int = Field(default=4, ge=2, le=64)
    draws: int = Field(default=1000, ge=100)
    ess: int = Field(default=1000, ge=100)
    r_hat: float = Field(default=1.01, gt=1, le=1.1)
    max_sweeps: int | None = Field(default=None, ge=1000)
    pseudo_samples: int = Field(default=100, ge=20, le=10_000)


class ReportSection(_Section):
    """What the report shows."""

    interval: float = Field(default=0.95, gt=0.5, lt=1)
    show_cases: StrictBool = False


class StudyFile(_Section):
    """A whole study file."""

    study: StudySection = StudySection()
    answers: AnswersSection
    items: dict[str, ItemSection] = {}
    model: ModelSection = ModelSection()
    class_count: ClassCountSection = ClassCountSection()
    groups: GroupsSection = GroupsSection()
    hypotheses: list[HypothesisSection] = []
    quantities: dict[str, str] = {}
    outcomes: list[OutcomeSection] = []
    fit: FitSection = FitSection()
    priors: PriorsSection = PriorsSection()
    maximum_likelihood: MaximumLikelihoodSection | None = None
    assignment: AssignmentSection | None = None
    predictors: PredictorsSection | None = None
    sampling: SamplingSection = SamplingSection()
    report: ReportSection = ReportSection()

    @model_validator(mode="after")
    def _something_is_fitted(self) -> StudyFile:
        if self.model.classes is None and not self.class_count.compare:
            msg = (
                "[model] classes is left out and [class_count] compare is empty, so there is "
                "nothing to fit; give one of them"
            )
            raise ValueError(msg)
        return self

    @model_validator(mode="after")
    def _groups_are_declared(self) -> StudyFile:
        asked = {
            "[groups] compare_free": self.groups.compare_free,
            "[groups] compare_pooled": self.groups.compare_pooled,
            "[model] free_by_group": self.model.free_by_group,
            "[model] pooled": self.model.pooled,
        }
        for key, value in asked.items():
            if value and self.answers.group is None:
                msg = f"{key} needs groups; name their column with [answers] group"
                raise ValueError(msg)
        return self

    @model_validator(mode="after")
    def _the_spread_is_of_pooled_units(self) -> StudyFile:
        pools = self.model.pooled or self.groups.compare_pooled
        if self.model.spread_prior != (1.0, 1.0) and not pools:
            msg = (
                "[model] spread_prior is about pooled units; set [model] pooled = true, or leave "
                "it out"
            )
            raise ValueError(msg)
        return self

    @model_validator(mode="after")
    def _claims_can_be_weighed(self) -> StudyFile:
        if (self.hypotheses or self.quantities) and self.model.classes is None:
            what = "[[hypotheses]]" if self.hypotheses else "[quantities]"
            msg = f"{what} speak of classes, and [model] classes is left out; name the classes"
            raise ValueError(msg)
        claims = [said.claim for said in self.hypotheses]
        for said in self.hypotheses:
            rivals = [other for other in self.hypotheses if other.rivals == said.rivals]
            if claims.count(said.claim) > 1:
                msg = f"[[hypotheses]] makes the claim {said.claim!r} twice; word them differently"
                raise ValueError(msg)
            if said.rivals and len(rivals) == 1:
                msg = (
                    f"[[hypotheses]] rivals = {said.rivals!r} has one hypothesis only; a set of "
                    "rivals has two or more"
                )
                raise ValueError(msg)
            if said.weight != 1.0 and not said.rivals:
                msg = f"[[hypotheses]] gives {said.claim!r} a weight, but no rivals to weigh it by"
                raise ValueError(msg)
        return self

    @model_validator(mode="after")
    def _pooled_units_have_no_weights(self) -> StudyFile:
        answers = self.answers
        design = {"weight": answers.weight, "cluster": answers.cluster, "stratum": answers.stratum}
        named = [key for key, column in design.items() if column is not None]
        if self.model.pooled and named:
            msg = (
                f"[answers] {named[0]} and [model] pooled do not go together: weights, clusters "
                "and strata are worked in for groups with prevalences of their own only; leave "
                "pooled out and let the units be clusters, or leave the design out"
            )
            raise ValueError(msg)
        return self

    @model_validator(mode="after")
    def _outcomes_can_be_related(self) -> StudyFile:
        columns = [said.column for said in self.outcomes]
        for said in self.outcomes:
            where = f"[[outcomes]] {said.column!r}"
            if columns.count(said.column) > 1:
                msg = f"{where} stands twice; name each column once"
                raise ValueError(msg)
            if said.column in self.answers.items:
                msg = f"{where} is an item of [answers]: it already makes the classes; leave it out"
                raise ValueError(msg)
            if not said.ways:
                msg = f"{where}: ways is empty; leave it out for all three ways"
                raise ValueError(msg)
            if said.orders and not isinstance(self.model.classes, list):
                msg = f"{where}: orders speak of classes by name; name them with [model] classes"
                raise ValueError(msg)
        return self

    @model_validator(mode="after")
    def _items_are_listed(self) -> StudyFile:
        for name in self.items:
            if name not in self.answers.items:
                msg = (
                    f"[items.{name}] describes an item that [answers] items does not list; "
                    "add it there, or leave the section out"
                )
                raise ValueError(msg)
        return self
