"""The model as the analyst states it: items, classes, and statements about them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from bayeslca._typing import Floats
from bayeslca.model.compile import compile_table
from bayeslca.model.prevalence import DirichletPrevalence
from bayeslca.model.table import Table
from bayeslca.responses.item import Groups, Item


@dataclass(frozen=True)
class LatentClassModel:
    """A latent class model.

    Parameters
    ----------
    items : tuple of Item
        The items, usually ``responses.items``.
    classes : int or tuple of str
        A number of classes (exploratory: they are called "1", "2", ... by falling prevalence)
        or their names (confirmatory: something stated must tell them apart).
    statements : tuple of str
        Priors and naming rules, such as ``"P(fees=yes | managed) ~ Beta(9, 2)"``.
    groups : Groups, optional
        Groups of cases with prevalences of their own, usually ``responses.groups``.
    statement_sources : mapping from str to str
        Where the prior in a statement comes from, for the report.
    """

    items: tuple[Item, ...]
    classes: int | tuple[str, ...]
    statements: tuple[str, ...] = ()
    groups: Groups | None = None
    statement_sources: Mapping[str, str] = field(default_factory=dict, hash=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "items", tuple(self.items))
        if not isinstance(self.classes, int):
            object.__setattr__(self, "classes", tuple(self.classes))
        object.__setattr__(self, "statements", tuple(self.statements))
        object.__setattr__(self, "statement_sources", dict(self.statement_sources))

    @property
    def exploratory(self) -> bool:
        """True when the classes were given as a number."""
        return isinstance(self.classes, int)

    @property
    def class_names(self) -> tuple[str, ...]:
        """Names of the classes; "1".."K" when only their number was given."""
        if isinstance(self.classes, int):
            return tuple(str(k + 1) for k in range(self.classes))
        return self.classes

    @property
    def n_classes(self) -> int:
        """Number of classes, K."""
        return len(self.class_names)

    @property
    def n_groups(self) -> int:
        """Number of groups of cases; 1 when there are none."""
        return len(self.groups.levels) if self.groups else 1

    def response_prior(self, item: int, latent_class: int) -> Floats:
        """Return the Dirichlet parameters (R,) of an item's answers in a class."""
        return np.ones(self.items[item].n_categories)

    @cached_property
    def prevalence_source(self) -> DirichletPrevalence:
        """The prior of the prevalences."""
        return DirichletPrevalence(np.ones((self.n_groups, self.n_classes)))

    @cached_property
    def table(self) -> Table:
        """The compiled form that engines read."""
        return compile_table(self)
