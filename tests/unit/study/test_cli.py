"""The command line as its user meets it: words, exit codes, nothing half-written."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

import bayeslca

Run = Callable[..., tuple[int, str, str]]


def test_help_lists_the_commands(run: Run) -> None:
    code, out, _ = run("--help")
    assert code == 0
    for command in ("draft", "inspect", "check", "run", "ask", "assign"):
        assert command in out
    assert max(map(len, out.splitlines())) <= 80


def test_version(run: Run) -> None:
    assert run("--version")[1].strip() == f"bayeslca {bayeslca.__version__}"


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (["chekc", "x"], "No such command 'chekc'"),
        (["run", "study.toml"], "Missing option"),
        (["check"], "Missing argument"),
        (["check", "nowhere.toml"], "no such study file"),
        (["inspect", "nowhere.csv"], "no such file"),
        (["draft", "nowhere.csv", "-o", "s.toml"], "no such file"),
        (["assign", "nowhere", "new.csv", "-o", "out.csv"], "no such results folder"),
        (["ask", "nowhere", "P(managed) > 0.5"], "no such results folder"),
        (["inspect", "x.csv", "--header-row", "one"], "not a valid integer"),
    ],
)
def test_wrong_calls_exit_with_2(run: Run, words: list[str], said: str) -> None:
    code, out, err = run(*words)
    assert code == 2
    assert said in err
    assert "Traceback" not in out + err


def test_wrong_input_is_one_error_with_its_place(run: Run, folder: Path) -> None:
    study = folder / "study.toml"
    study.write_text(study.read_text("utf-8").replace("seed = 7", "sead = 7"), encoding="utf-8")
    code, out, err = run("check", study)
    assert (code, out) == (2, "")
    assert err.startswith("error: study.toml, line 17, [sampling] sead: unknown key")


def test_check_says_the_model_in_words(run: Run, folder: Path) -> None:
    code, out, _ = run("check", folder / "study.toml")
    assert code == 0
    assert "managed is where P(fees=yes) is highest" in out
    assert "What to know before running" in out
    assert "expected time" in out
    assert max(map(len, out.splitlines())) <= 80
    assert sorted(path.name for path in folder.iterdir()) == ["answers.csv", "study.toml"]


def test_check_says_that_run_will_refuse_impossible_answers(run: Run, folder: Path) -> None:
    study = folder / "study.toml"
    text = study.read_text("utf-8").replace(
        'statements = ["managed is where P(fees=yes) is highest"]',
        'statements = ["P(fees=yes | lapsed) = 0", "P(meets=yes | managed) = 0"]',
    )
    study.write_text(text, encoding="utf-8")
    code, out, _ = run("check", study)
    assert code == 0
    assert "!! 3 case(s) gave answers" in out
    assert out.rstrip().endswith("- refuse to sample until what is marked !! is put right")
    assert run("run", study, "-o", folder / "results")[0] == 2


def test_a_fault_of_ours_exits_with_3(
    run: Run, folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def broken(path: Path) -> str:
        raise ZeroDivisionError

    monkeypatch.setattr("bayeslca.study.check.check_study", broken)
    code, _, err = run("check", folder / "study.toml")
    assert code == 3
    assert "fault of bayeslca" in err
    assert "Traceback" not in err


def test_an_interruption_exits_with_130(
    run: Run, folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def interrupted(*args: object, **options: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr("bayeslca.study.job._own_posterior", interrupted)
    code, _, err = run("run", folder / "study.toml", "-o", folder / "results")
    assert code == 130
    assert "nothing was written" in err
    assert not (folder / "results").exists()


def test_results_are_not_written_over_other_files(run: Run, folder: Path) -> None:
    code, _, err = run("run", folder / "study.toml", "-o", folder)
    assert code == 2
    assert "did not write" in err
    code, _, err = run("run", folder / "study.toml", "-o", folder / "study.toml")
    assert code == 2
    assert "is a file" in err


@pytest.mark.parametrize("words", [["--help"], ["--version"], ["run", "--help"]])
def test_help_loads_nothing_heavy(words: list[str]) -> None:
    code = (
        f"import sys; sys.argv = ['bayeslca', *{words!r}]\n"
        "from bayeslca import cli\n"
        "try: cli.main()\n"
        "except SystemExit: pass\n"
        "heavy = {'pymc', 'numba', 'arviz', 'arviz_stats', 'matplotlib', 'pandas', 'scipy'}\n"
        "print('LOADED', sorted(heavy & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert "LOADED []" in done.stdout


def test_importing_loads_nothing_heavy() -> None:
    code = (
        "import sys, bayeslca\n"
        "bayeslca.Responses, bayeslca.LatentClassModel, bayeslca.Item\n"
        "heavy = {'pymc', 'numba', 'arviz', 'arviz_stats', 'matplotlib'}\n"
        "print(sorted(heavy & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_versions_are_equal() -> None:
    from importlib.metadata import version

    assert version("bayeslca") == bayeslca.__version__


def test_small_matrices_get_one_thread_unless_the_user_says_otherwise(
    run: Run, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("OPENBLAS_NUM_THREADS", "2")
    run("--version")
    assert os.environ["OPENBLAS_NUM_THREADS"] == "2"
    monkeypatch.delenv("OPENBLAS_NUM_THREADS")
    run("--version")
    assert os.environ["OPENBLAS_NUM_THREADS"] == "1"


def test_nothing_loads_numpy_before_the_command_line_starts() -> None:
    # The number of threads is read when NumPy is loaded.
    code = "import sys, bayeslca.cli; sys.exit('numpy' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
