"""Steps of a run: fits that are kept when nothing they rest on has changed."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import bayeslca
from bayeslca.exceptions import StorageError
from bayeslca.study.results import Results

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel
    from bayeslca.posterior.posterior import Posterior
    from bayeslca.responses.responses import Responses

OWN_FIT = "fit.nc"
"""File of the study's own model."""


def count_fit(n_classes: int) -> str:
    """File of the unconstrained model with ``n_classes`` classes."""
    return f"fits/classes-{n_classes}.nc"


ALIKE_FIT, FREE_FIT = "fits/groups-alike.nc", "fits/groups-free.nc"
"""Files of the models whose groups answer alike, or each in its own way."""
UNIT_FITS = {
    "pooled": "fits/units-pooled.nc",
    "each alone": "fits/units-alone.nc",
    "all as one": "fits/units-one.nc",
}
"""Files of the models that are compared by leaving units out, by the names of their rows."""


def step_key(
    responses: Responses, model: LatentClassModel, sampling: Mapping[str, Any], seed: int
) -> str:
    """Digest of all that a fit rests on: data, model, sampling, seed and version."""
    content = {
        "data": responses.data_hash,
        "cases": responses.row_names_hash,
        "model": model.to_dict(),
        "sampling": dict(sampling),
        "seed": seed,
        "version": bayeslca.__version__,
    }
    text = json.dumps(content, sort_keys=True, default=str)
    return hashlib.sha256(text.encode()).hexdigest()


@dataclass
class Steps:
    """The fits of one run: taken from the previous results where their key is unchanged.

    Attributes
    ----------
    previous : Results or None
    keys : dict of str to str
        Key of each fit that belongs to this run, by its file.
    kept : list of str
        Files of the fits taken over.
    """

    previous: Results | None
    keys: dict[str, str] = field(default_factory=dict)
    kept: list[str] = field(default_factory=list)

    def take(self, file: str, key: str) -> Posterior | None:
        """Return the previous fit in ``file`` when its key is the same, else None."""
        from bayeslca.posterior.posterior import Posterior

        self.keys[file] = key
        if self.previous is None or self.previous.fit_keys.get(file) != key:
            return None
        try:
            posterior = Posterior.load(self.previous.folder / file)
        except StorageError:
            return None  # damaged since: fitted again
        self.kept.append(file)
        return posterior
