"""Saving and loading: a round trip changes nothing; other files are named."""

from __future__ import annotations

from pathlib import Path

import h5py
import numpy as np
import pandas as pd
import pytest
import xarray as xr

from bayeslca.exceptions import StorageError
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.posterior import storage
from bayeslca.posterior.posterior import Posterior
from bayeslca.responses.responses import Responses

TABLES = (
    "prevalence", "response_probabilities", "membership", "assignment_error", "separation",
)  # fmt: skip


@pytest.mark.parametrize("name", ["posterior", "grouped", "single"])
def test_a_round_trip_changes_nothing(
    name: str, request: pytest.FixtureRequest, tmp_path: Path
) -> None:
    saved: Posterior = request.getfixturevalue(name)
    saved.save(tmp_path / "fit.nc")
    loaded = Posterior.load(str(tmp_path / "fit.nc"))
    for table in TABLES:
        pd.testing.assert_frame_equal(getattr(saved, table)(), getattr(loaded, table)())
    xr.testing.assert_identical(saved.tree, loaded.tree)
    assert loaded.model == saved.model
    ours, theirs = saved.responses, loaded.responses
    for field in ("items", "case_ids", "case_name", "groups", "findings", "source", "data_hash"):
        assert getattr(ours, field) == getattr(theirs, field)
    np.testing.assert_array_equal(ours.codes, theirs.codes)
    for field in ("sampler", "seed", "sweeps", "warmup", "thin", "seconds", "limit_reached"):
        assert getattr(saved.draws, field) == getattr(loaded.draws, field)
    assert set(saved.draws.statistics) == set(loaded.draws.statistics)
    assert saved.draws.starts is not None
    assert loaded.draws.starts is not None
    assert saved.draws.starts.in_words() == loaded.draws.starts.in_words()
    np.testing.assert_array_equal(saved.relabelled.permutations, loaded.relabelled.permutations)
    assert saved.relabelled.findings == loaded.relabelled.findings
    assert saved.relabelled.share_per_labelling == loaded.relabelled.share_per_labelling
    assert repr(saved) == repr(loaded)


def test_the_log_likelihood_per_unit_can_be_left_out(posterior: Posterior, tmp_path: Path) -> None:
    storage.save(posterior, tmp_path / "small.nc", replace=False, per_unit=False)
    with xr.open_datatree(tmp_path / "small.nc", engine="h5netcdf") as file:
        assert "unit_log_likelihood" not in file.children
    xr.testing.assert_identical(posterior.tree, Posterior.load(tmp_path / "small.nc").tree)
    assert "unit_log_likelihood" in posterior.tree.children


def test_a_loaded_posterior_assigns_new_cases(grouped: Posterior, tmp_path: Path) -> None:
    grouped.save(tmp_path / "fit.nc")
    loaded = Posterior.load(tmp_path / "fit.nc")
    pd.testing.assert_frame_equal(loaded.assign(grouped.responses), grouped.membership())


def test_patterns_without_case_names(posterior: Posterior, tmp_path: Path) -> None:
    frame = pd.DataFrame({"a": ["0", "0", "1", "1"], "b": ["0", "1", "0", "1"], "n": [9, 2, 3, 8]})
    table = Responses.from_frame(frame, items=["a", "b"], counts="n")
    model = LatentClassModel(table.items, 1)
    model.sample(table, seed=None, draws=50, ess=20, progress=False).save(tmp_path / "fit.nc")
    loaded = Posterior.load(tmp_path / "fit.nc")
    assert loaded.responses.case_ids is None
    assert loaded.responses.is_table_of_patterns
    assert loaded.draws.seed is None
    assert loaded.to_arviz()["log_likelihood"].sizes["case"] == 22


def test_nothing_is_overwritten_unless_asked(posterior: Posterior, tmp_path: Path) -> None:
    path = tmp_path / "fit.nc"
    path.write_text("mine")
    with pytest.raises(StorageError, match=r"exists already\. Save with replace=True"):
        posterior.save(path)
    assert path.read_text() == "mine"
    posterior.save(path, replace=True)
    assert Posterior.load(path).model == posterior.model
    assert [file.name for file in tmp_path.iterdir()] == ["fit.nc"]


def test_a_failed_write_leaves_the_old_file(
    posterior: Posterior, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "fit.nc"
    path.write_text("old")

    def fail(self: object, file: Path, **options: object) -> None:
        Path(file).write_text("half")
        msg = "disk full"
        raise OSError(msg)

    monkeypatch.setattr(xr.DataTree, "to_netcdf", fail)
    with pytest.raises(StorageError, match="cannot be written: disk full"):
        posterior.save(path, replace=True)
    assert path.read_text() == "old"
    assert [file.name for file in tmp_path.iterdir()] == ["fit.nc"]


def test_a_folder_that_is_not_there(posterior: Posterior, tmp_path: Path) -> None:
    with pytest.raises(StorageError, match=r"does not exist\. Make it first"):
        posterior.save(tmp_path / "nowhere" / "fit.nc")


def test_missing_broken_and_foreign_files(posterior: Posterior, tmp_path: Path) -> None:
    path = tmp_path / "fit.nc"
    with pytest.raises(StorageError, match="there is no such file"):
        Posterior.load(path)
    path.write_text("committee,fees\n1,yes\n")
    with pytest.raises(StorageError, match="not a NetCDF file, or it is damaged"):
        Posterior.load(path)
    posterior.save(path, replace=True)
    path.write_bytes(path.read_bytes()[:20000])
    with pytest.raises(StorageError, match="not a NetCDF file, or it is damaged"):
        Posterior.load(path)
    posterior.tree.to_netcdf(path, engine="h5netcdf")
    with pytest.raises(StorageError, match="was not saved by bayeslca"):
        Posterior.load(path)


def test_newer_files_are_refused(
    posterior: Posterior, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "fit.nc"
    with monkeypatch.context() as patch:
        patch.setattr(storage, "FORMAT", 7)
        posterior.save(path)
    with pytest.raises(StorageError, match=r"newer version .* \(file format 7"):
        Posterior.load(path)


@pytest.mark.parametrize("group", ["block_draws", "sample_stats", "posterior"])
def test_a_file_that_lacks_a_part(posterior: Posterior, tmp_path: Path, group: str) -> None:
    path = tmp_path / "fit.nc"
    posterior.save(path)
    with xr.open_datatree(path, engine="h5netcdf") as tree:
        tree.filter(lambda node: node.name != group).to_netcdf(
            tmp_path / "part.nc", engine="h5netcdf"
        )
    with pytest.raises(StorageError, match="lacks a part of a posterior"):
        Posterior.load(tmp_path / "part.nc")


def test_answers_that_were_tampered_with(posterior: Posterior, tmp_path: Path) -> None:
    path = tmp_path / "fit.nc"
    posterior.save(path)
    with h5py.File(path, "r+") as file:
        codes = file["bayeslca"]["codes"]
        codes[0, 0] = 1 - codes[0, 0]
    with pytest.raises(StorageError, match="answers are not those it was saved with"):
        Posterior.load(path)


def test_no_pickle_is_in_the_file(posterior: Posterior, tmp_path: Path) -> None:
    posterior.save(tmp_path / "fit.nc")
    assert b"pickle" not in (tmp_path / "fit.nc").read_bytes()
