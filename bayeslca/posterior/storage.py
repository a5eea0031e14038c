"""Saving a posterior as NetCDF, and loading it again; no pickles.

The file is the posterior's tree (any reader of ArviZ's schema can use it) with one more group,
``bayeslca``: the answers row by row, and how the draws were labelled.
"""

from __future__ import annotations

import json
import os
from collections.abc import Mapping
from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING, Any
from uuid import uuid4

import numpy as np

from bayeslca._typing import Floats
from bayeslca.exceptions import BayesLCAError, StorageError
from bayeslca.findings import Finding
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.responses.item import Groups, Item
from bayeslca.responses.responses import Responses
from bayeslca.responses.sample_design import SampleDesign
from bayeslca.sampling.draws import Draws
from bayeslca.sampling.relabel import Relabelled
from bayeslca.sampling.starting_points import StartingPoints

if TYPE_CHECKING:
    from xarray import Dataset, DataTree

    from bayeslca.posterior.posterior import Posterior

FORMAT = 1
"""Version of the file; a reader refuses what is newer than it knows."""
GROUP = "bayeslca"
_STATISTICS = ("lp", "log_likelihood", "log_prior")


def save(posterior: Posterior, path: Path, *, replace: bool, per_unit: bool = True) -> None:
    """Write a posterior aside and put it in place whole.

    Parameters
    ----------
    posterior : Posterior
    path : Path
    replace : bool
        Overwrite a file that exists.
    per_unit : bool
        Write the log likelihood per unit too. It is most of the file where units are many, and
        a loaded posterior computes it anew.

    Raises
    ------
    StorageError
        When the file exists and is not to be replaced, or cannot be written.
    """
    if path.exists() and not replace:
        msg = f"{path} exists already. Save with replace=True to overwrite it, or name another."
        raise StorageError(msg)
    if not path.parent.is_dir():
        msg = f"{path}: its folder {path.parent} does not exist. Make it first."
        raise StorageError(msg)
    aside = path.with_name(f".{path.name}.{uuid4().hex[:8]}.partial")
    try:
        _file_tree(posterior, per_unit=per_unit).to_netcdf(aside, engine="h5netcdf")
        os.replace(aside, path)
    except OSError as error:
        msg = f"{path} cannot be written: {error}."
        raise StorageError(msg) from error
    finally:
        aside.unlink(missing_ok=True)


def load(path: Path) -> Posterior:
    """Read a saved posterior.

    Raises
    ------
    StorageError
        When the file is missing, broken, from another program, or newer than this version.
    """
    import xarray

    if not path.is_file():
        msg = f"{path}: there is no such file. Save one with posterior.save."
        raise StorageError(msg)
    try:
        file = xarray.open_datatree(path, engine="h5netcdf")
    except Exception as error:  # whatever a damaged file makes the readers raise
        msg = f"{path} is not a NetCDF file, or it is damaged. Sample again and save anew."
        raise StorageError(msg) from error
    with file as tree:
        _check_origin(tree, path)
        try:
            return _posterior(tree)
        except (BayesLCAError, LookupError, OSError, TypeError, ValueError) as error:
            msg = f"{path} lacks a part of a posterior ({error}). Sample again and save anew."
            raise StorageError(msg) from error


def _check_origin(tree: DataTree, path: Path) -> None:
    if GROUP not in tree.children:
        msg = f"{path} was not saved by bayeslca, or only in part. Give a file of posterior.save."
        raise StorageError(msg)
    found = int(tree[GROUP].attrs.get("format", 0))
    if found > FORMAT:
        msg = (
            f"{path} was saved by a newer version of bayeslca (file format {found}; this version "
            f"reads up to {FORMAT}). Update bayeslca."
        )
        raise StorageError(msg)


def _file_tree(posterior: Posterior, *, per_unit: bool) -> DataTree:
    from xarray import DataTree

    tree = posterior.tree.copy()
    if not per_unit:
        del tree["unit_log_likelihood"]
    tree[GROUP] = DataTree(_own_group(posterior))
    return tree


def _own_group(posterior: Posterior) -> Dataset:
    from xarray import Dataset

    responses, relabelled = posterior.responses, posterior.relabelled
    data: dict[str, Any] = {
        "codes": (("row", "response_item"), np.ascontiguousarray(responses.codes)),
        "row_count": ("row", responses.counts),
        "group_code": ("row", responses.group_codes),
        "permutation": (
            ("chain", "draw", "prevalence_row", "class_position"),
            relabelled.permutations.astype(np.int16),
        ),
    }
    if responses.case_ids is not None:
        data["case_id"] = ("row", np.asarray(responses.case_ids, dtype=object))
    groups, design = responses.groups, responses.design
    if design is not None:
        for name, values in (
            ("weight", design.weight),
            ("cluster", design.cluster),
            ("stratum", design.stratum),
        ):
            data[f"design_{name}"] = ("row", values)
    about = {
        "responses": {
            "items": [asdict(item) for item in responses.items],
            "case_name": responses.case_name,
            "groups": None if groups is None else [groups.name, list(groups.levels)],
            "findings": [asdict(finding) for finding in responses.findings],
            "source": responses.source,
            "is_table_of_patterns": responses.is_table_of_patterns,
            "design": None
            if design is None
            else [
                design.weight_name,
                design.cluster_name,
                design.stratum_name,
                list(design.stratum_levels),
            ],
        },
        "labels": {
            "names_settled": relabelled.names_settled,
            "share_per_labelling": list(relabelled.share_per_labelling),
            "findings": [asdict(finding) for finding in relabelled.findings],
        },
        "starts": _starts_to_dict(posterior.draws.starts),
    }
    return Dataset(data, attrs={"format": FORMAT, "about": json.dumps(about)})


def _starts_to_dict(starts: StartingPoints | None) -> dict[str, Any] | None:
    if starts is None:
        return None
    return {
        "log_posterior": starts.log_posterior.tolist(),
        "mode": starts.mode.tolist(),
        "n_modes": int(starts.n_modes),
        "kept": starts.kept.tolist(),
        "dropped": [int(mode) for mode in starts.dropped],
        "best": float(starts.best),
        "reach": float(starts.reach),
        "shares": [float(share) for share in starts.shares],
        "share_errors": [float(error) for error in starts.share_errors],
        "why_unweighed": starts.why_unweighed,
    }


def _starts_from_dict(values: Mapping[str, Any] | None) -> StartingPoints | None:
    if values is None:
        return None
    return StartingPoints(
        log_posterior=np.asarray(values["log_posterior"], dtype=np.float64),
        mode=np.asarray(values["mode"], dtype=np.int64),
        n_modes=values["n_modes"],
        kept=np.asarray(values["kept"], dtype=np.int64),
        dropped=tuple(values["dropped"]),
        best=values["best"],
        reach=values["reach"],
        shares=tuple(values.get("shares", ())),
        share_errors=tuple(values.get("share_errors", ())),
        why_unweighed=values.get("why_unweighed", ""),
    )


def _posterior(tree: DataTree) -> Posterior:
    from bayeslca.posterior.posterior import Posterior

    about = json.loads(tree[GROUP].attrs["about"])
    model = LatentClassModel.from_dict(json.loads(tree.attrs["model"]))
    labels = about["labels"]
    relabelled = Relabelled(
        draws=_draws(tree, about),
        permutations=tree[GROUP]["permutation"].to_numpy().astype(np.int64),
        names_settled=labels["names_settled"],
        share_per_labelling=tuple(labels["share_per_labelling"]),
        findings=_findings(labels["findings"]),
    )
    responses = _responses(tree, about["responses"])
    if responses.data_hash != tree.attrs["data_hash"]:
        msg = "its answers are not those it was saved with"
        raise ValueError(msg)
    return Posterior(
        model=model,
        responses=responses,
        relabelled=relabelled,
        created_at=tree.attrs["created_at"],
        versions=json.loads(tree.attrs["versions"]),
    )


def _draws(tree: DataTree, about: Mapping[str, Any]) -> Draws:
    attrs, stats = tree.attrs, tree["sample_stats"]
    prevalence = tree["posterior"]["prevalence"].to_numpy()
    return Draws(
        elements=tree["block_draws"]["elements"].to_numpy(),
        prevalence=prevalence if prevalence.ndim == 4 else prevalence[:, :, None, :],
        log_likelihood=stats["log_likelihood"].to_numpy(),
        log_prior=stats["log_prior"].to_numpy(),
        statistics={
            str(name): values.to_numpy()
            for name, values in stats.data_vars.items()
            if name not in _STATISTICS
        },
        sampler=attrs["sampler"],
        seed=None if attrs["seed"] == "none" else int(attrs["seed"]),
        sweeps=int(attrs["sweeps"]),
        warmup=int(attrs["warmup"]),
        thin=int(attrs["thin"]),
        seconds=float(attrs["sampling_time"]),
        limit_reached=bool(attrs["limit_reached"]),
        concentration=_concentration(tree),
        starts=_starts_from_dict(about["starts"]),
    )


def _concentration(tree: DataTree) -> Floats | None:
    """Return what pooled units' prevalences were drawn from; None where they are not pooled."""
    if "unit_concentration" not in tree["posterior"]:
        return None
    mean = tree["posterior"]["mean_prevalence"].to_numpy()
    total = tree["posterior"]["unit_concentration"].to_numpy()
    return np.asarray(total[..., None] * mean)


def _responses(tree: DataTree, about: Mapping[str, Any]) -> Responses:
    own = tree[GROUP]
    case_ids = None
    if "case_id" in own:
        case_ids = tuple(str(name) for name in own["case_id"].to_numpy())
    groups = about["groups"]
    return Responses(
        items=tuple(
            Item(**(item | {"categories": tuple(item["categories"])})) for item in about["items"]
        ),
        codes=np.asfortranarray(own["codes"].to_numpy().astype(np.int16)),
        counts=own["row_count"].to_numpy().astype(np.int64),
        case_ids=case_ids,
        case_name=about["case_name"],
        groups=groups and Groups(groups[0], tuple(groups[1])),
        group_codes=own["group_code"].to_numpy().astype(np.int32),
        findings=_findings(about["findings"]),
        source=about["source"],
        is_table_of_patterns=about["is_table_of_patterns"],
        design=_design(own, about.get("design")),
    )


def _design(own: Any, about: list[Any] | None) -> SampleDesign | None:
    if about is None:
        return None
    weight, cluster, stratum, levels = about
    return SampleDesign(
        own["design_weight"].to_numpy(),
        own["design_cluster"].to_numpy().astype(np.int64),
        own["design_stratum"].to_numpy().astype(np.int64),
        weight,
        cluster,
        stratum,
        tuple(levels),
    )


def _findings(values: list[dict[str, Any]]) -> tuple[Finding, ...]:
    return tuple(Finding(**(value | {"about": tuple(value["about"])})) for value in values)
