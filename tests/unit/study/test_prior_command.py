"""A prior from a judgement, and what a study's priors imply, on the command line."""

from __future__ import annotations

import re
from collections.abc import Callable
from pathlib import Path

import pytest
from scipy import stats

from bayeslca import Item, LatentClassModel
from bayeslca.exceptions import StatementError
from bayeslca.study.check import check_study
from bayeslca.study.prior import beta_prior

Run = Callable[..., tuple[int, str, str]]
ASKED = ("prior", "--most-likely", 0.8, "--sure", 0.95)


def test_the_statement_can_be_pasted_and_its_points_are_those_of_scipy(run: Run) -> None:
    code, out, _ = run(*ASKED, "--above", 0.6, "--target", "P(fees=yes | managed)")
    assert code == 0
    statement, *_ = out.splitlines()
    model = LatentClassModel([Item("fees", ("no", "yes"))], ("managed",), statements=(statement,))
    b, a = model.priors.response[0][0][0]
    assert (a - 1) / (a + b - 2) == pytest.approx(0.8, abs=1e-3)
    assert stats.beta.sf(0.6, a, b) == pytest.approx(0.95, abs=1e-3)
    points = [float(x) for x in re.findall(r"% of it lie below +([\d.]+)", out)]
    assert points == pytest.approx(stats.beta.ppf([0.05, 0.5, 0.95], a, b), abs=5.01e-4)
    assert f"{a + b:.3g} cases" in out
    assert "--target" not in out


def test_without_a_target_it_says_what_to_put_in(run: Run) -> None:
    code, out, _ = run(*ASKED, "--above", 0.6)
    assert code == 0
    assert out.startswith("P(item=answer | class) ~ Beta(")
    assert "Put your own item" in out


def test_a_bound_from_above_is_the_mirror_image(run: Run) -> None:
    statement = run("prior", "--most-likely", 0.2, "--below", 0.4, "--sure", 0.95)[1].split("\n")[0]
    mirrored = run(*ASKED, "--above", 0.6)[1].split("\n")[0]
    a, b = re.findall(r"[\d.]+", statement)
    assert mirrored.endswith(f"Beta({b}, {a})")


@pytest.mark.parametrize(
    ("words", "says"),
    [
        ((*ASKED, "--above", 0.9), "excludes the most likely value"),
        ((*ASKED,), "Give either above or below"),
        ((*ASKED, "--above", 0.6, "--below", 0.9), "Give either above or below"),
        (("prior", "--most-likely", 80, "--above", 0.6, "--sure", 0.95), "is no probability"),
        (("prior", "--most-likely", 0.8, "--above", 0.6, "--sure", 0.3), "less than the uniform"),
        (("prior", "--above", 0.6, "--sure", 0.95), "Missing option '--most-likely'"),
        ((*ASKED, "--above", "much"), "not a valid float"),
        ((*ASKED, "--above", 0.6, "--target", "fees"), "begins with a probability"),
        ((*ASKED, "--above", 0.6, "--target", "P(managed)"), "one Dirichlet prior"),
        ((*ASKED, "--above", 0.6, "--target", "P(fees=yes | managed"), "not closed"),
    ],
)
def test_wrong_judgements_end_with_2(run: Run, words: tuple[object, ...], says: str) -> None:
    code, out, err = run(*words)
    assert code == 2
    assert says in err
    assert not out


@pytest.mark.parametrize("target", ["P(managed, lapsed)", "P(type=a, b | managed)"])
def test_several_probabilities_have_no_beta(target: str) -> None:
    with pytest.raises(StatementError, match="one answer's probability"):
        beta_prior(0.8, above=0.6, sure=0.95, target=target)


def test_check_shows_what_the_priors_imply_only_when_asked(folder: Path, run: Run) -> None:
    study = folder / "study.toml"
    assert "What the priors imply" not in run("check", study)[1]
    code, out, _ = run("check", study, "--prior")
    assert code == 0
    said = out[out.index("What the priors imply") :]
    assert "a study of 6 cases" in said
    for part in ("managed", "fees=yes | lapsed", "meets=yes", "distinct patterns"):
        assert part in said
    assert "seen" not in said  # a prior is argued about before the data are
    assert max(map(len, out.splitlines())) <= 80
    assert out == run("check", study, "--prior")[1]


def test_with_an_open_number_of_classes_two_are_shown(folder: Path) -> None:
    study = folder / "study.toml"
    text = study.read_text(encoding="utf-8")
    study.write_text(re.sub(r"\[model\].*?\n\n", "", text, flags=re.S), encoding="utf-8")
    said = check_study(study, prior=True)
    assert "With two classes:\nWhat the priors imply" in said
    assert "any class" in said


def test_groups_keep_their_sizes(folder: Path) -> None:
    study = folder / "study.toml"
    text = study.read_text(encoding="utf-8").replace(
        'case = "committee"', 'case = "committee"\ngroup = "district"'
    )
    study.write_text(text, encoding="utf-8")
    said = check_study(study, prior=True)
    assert "managed, hill" in said
    assert "lapsed, overall" in said
