"""The results folder: written aside and renamed, never clobbered, and read again."""

from __future__ import annotations

import json
import os
import shutil
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any
from uuid import uuid4

from bayeslca.exceptions import StorageError

if TYPE_CHECKING:
    import pandas as pd

RECORD = "run.json"
"""The file that says how the results were made; a folder without it is not ours to replace."""


@dataclass(frozen=True)
class Results:
    """A finished run.

    Attributes
    ----------
    folder : Path
    record : mapping
        What ``run.json`` says: versions, seed, the keys of the steps, the fits' files.
    """

    folder: Path
    record: Mapping[str, Any]

    @property
    def fit_keys(self) -> Mapping[str, str]:
        """Key of each saved fit by its file (``fit.nc``, ``fits/classes-2.nc``)."""
        keys: Mapping[str, str] = self.record["fits"]
        return keys

    @property
    def main_fit(self) -> Path:
        """The fit that the answer rests on."""
        return self.folder / str(self.record["answer_rests_on"])

    def table(self, name: str) -> pd.DataFrame | None:
        """Read one of the tables back, or None when the run did not write it."""
        import pandas as pd

        path = self.folder / "tables" / f"{name}.csv"
        return pd.read_csv(path, dtype={"latent_class": str}) if path.exists() else None


def open_results(folder: Path) -> Results:
    """Open the results of a finished run.

    Raises
    ------
    StorageError
        When the folder is not there, or does not hold the results of a finished run.
    """
    if not folder.is_dir():
        msg = f"{folder}: no such results folder. `bayeslca run STUDY -o {folder}` makes one."
        raise StorageError(msg)
    record = folder / RECORD
    try:
        content = json.loads(record.read_text(encoding="utf-8"))
        return Results(folder, {"fits": content["fits"], **content})
    except FileNotFoundError:
        msg = f"{folder}: not a results folder of bayeslca ({RECORD} is not in it)."
        raise StorageError(msg) from None
    except (OSError, ValueError, KeyError, TypeError):
        msg = f"{record}: cannot be read; run the study again into another folder."
        raise StorageError(msg) from None


def previous_results(folder: Path, *, replace: bool) -> Results | None:
    """Say what stands at ``folder`` before anything is computed.

    Raises
    ------
    StorageError
        When something stands there and was not to be replaced, or is not ours to replace.
    """
    if not folder.exists() or (folder.is_dir() and not any(folder.iterdir())):
        return None
    if folder.is_file():
        msg = f"{folder}: is a file; name a folder for the results with -o."
        raise StorageError(msg)
    if not (folder / RECORD).exists():
        msg = (
            f"{folder}: holds files that bayeslca did not write, so nothing is put there. "
            "Name another folder with -o."
        )
        raise StorageError(msg)
    if not replace:
        msg = (
            f"{folder}: holds results already. Use --replace to renew them (unchanged steps are "
            "kept), or name another folder with -o."
        )
        raise StorageError(msg)
    return open_results(folder)


@contextmanager
def written_aside(folder: Path) -> Iterator[Path]:
    """Give a folder to write into that becomes ``folder`` only when all went well."""
    folder.parent.mkdir(parents=True, exist_ok=True)
    aside = folder.parent / f".{folder.name}.{uuid4().hex[:8]}.partial"
    aside.mkdir()
    try:
        yield aside
        _put_in_place(aside, folder)
    finally:
        shutil.rmtree(aside, ignore_errors=True)


def _put_in_place(aside: Path, folder: Path) -> None:
    if folder.exists():
        old = aside.with_suffix(".old")
        os.replace(folder, old)
        try:
            os.replace(aside, folder)
        except OSError:
            os.replace(old, folder)
            raise
        shutil.rmtree(old, ignore_errors=True)
    else:
        os.replace(aside, folder)


def write_text_aside(path: Path, text: str, *, replace: bool) -> None:
    """Write a text file whole or not at all; refuse to overwrite unless asked.

    Raises
    ------
    StorageError
        When the file is there and ``replace`` is False, or its folder is not.
    """
    if path.exists() and not replace:
        msg = f"{path}: is there already. Use --replace to overwrite it, or name another file."
        raise StorageError(msg)
    if not path.parent.is_dir():
        msg = f"{path}: its folder {path.parent} does not exist. Make it first."
        raise StorageError(msg)
    aside = path.with_name(f".{path.name}.{uuid4().hex[:8]}.partial")
    try:
        aside.write_text(text, encoding="utf-8", newline="\n")
        os.replace(aside, path)
    finally:
        aside.unlink(missing_ok=True)
