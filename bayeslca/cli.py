"""The command line: a thin layer of words over the study room.

Exit codes: 0 done; 1 done, but the answer rests on sampling that is not to be trusted; 2 the input
is wrong; 3 a fault of ours; 130 interrupted. Nothing heavy is imported before a command runs, so
that ``--help`` answers at once.
"""

from __future__ import annotations

import os
import sys
import traceback
from pathlib import Path

import click

from bayeslca.exceptions import BayesLCAError

INPUT_IS_WRONG = 2
OUR_FAULT = 3
INTERRUPTED = 130

_FILE = click.Path(path_type=Path)


@click.group(context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 80})
@click.version_option(package_name="bayeslca", message="bayeslca %(version)s")
def commands() -> None:
    """Bayesian latent class modelling for small samples.

    \b
    A study goes like this:
      bayeslca inspect committees.csv              what is in the file
      bayeslca draft committees.csv -o study.toml  a first study file to edit
      bayeslca prior --most-likely 0.8 ...         a prior from a judgement
      bayeslca check study.toml                    the model in words, warnings
      bayeslca run study.toml -o results           the whole job, with a report
      bayeslca ask results "P(..) > P(..)"         a hypothesis or a quantity
      bayeslca assign results new.csv -o out.csv   membership of new cases
    """  # noqa: D301 - click keeps lines as they are after a real backspace


@commands.command()
@click.argument("file", type=_FILE)
@click.option("--sheet", help="Sheet of a workbook (its name, or its number from 1).")
@click.option("--header-row", default=1, show_default=True, help="Row that holds the names.")
@click.option("--encoding", help="Encoding of a text file, such as latin-1.")
@click.option("--separator", help="Separator of a text file, such as ';'.")
def inspect(
    file: Path, sheet: str | None, header_row: int, encoding: str | None, separator: str | None
) -> None:
    """Show what a file holds: columns, codes, labels, missing answers."""
    from bayeslca.study.inspect import inspection

    _print(
        inspection(
            file, sheet=_sheet(sheet), header_row=header_row, encoding=encoding, separator=separator
        )
    )


@commands.command()
@click.argument("file", type=_FILE)
@click.option("-o", "--output", type=_FILE, required=True, help="Study file to write.")
@click.option("--sheet", help="Sheet of a workbook (its name, or its number from 1).")
@click.option("--header-row", default=1, show_default=True, help="Row that holds the names.")
@click.option("--encoding", help="Encoding of a text file, such as latin-1.")
@click.option("--separator", help="Separator of a text file, such as ';'.")
@click.option("--replace", is_flag=True, help="Overwrite the study file if it is there.")
def draft(
    file: Path,
    output: Path,
    sheet: str | None,
    header_row: int,
    encoding: str | None,
    separator: str | None,
    replace: bool,
) -> None:
    """Write a commented study file for a file of answers."""
    from bayeslca.study.draft import write_draft

    said = write_draft(
        file,
        output,
        sheet=_sheet(sheet),
        header_row=header_row,
        encoding=encoding,
        separator=separator,
        replace=replace,
    )
    _print(said)


@commands.command()
@click.argument("study", type=_FILE)
@click.option("--prior", is_flag=True, help="Show also what the priors imply before the data.")
def check(study: Path, prior: bool) -> None:
    """Read the study and say what would be done; fits nothing."""
    from bayeslca.study.check import check_study

    _print(check_study(study, prior=prior))


@commands.command()
@click.option("--most-likely", type=float, required=True, help="The most likely value, 0 to 1.")
@click.option("--above", type=float, help="The probability is above this ...")
@click.option("--below", type=float, help="... or below this (give one of them) ...")
@click.option("--sure", type=float, required=True, help="... with this sureness, such as 0.95.")
@click.option("--target", help="What it is of, such as 'P(fees=yes | managed)'.")
def prior(
    most_likely: float, above: float | None, below: float | None, sure: float, target: str | None
) -> None:
    """Turn an expert's judgement into a prior to paste."""
    from bayeslca.study.prior import beta_prior

    _print(beta_prior(most_likely, above=above, below=below, sure=sure, target=target))


@commands.command()
@click.argument("study", type=_FILE)
@click.option("-o", "--output", type=_FILE, required=True, help="Folder for the results.")
@click.option("--replace", is_flag=True, help="Renew the results; unchanged steps are kept.")
@click.option("--quiet", is_flag=True, help="Print only where the report is.")
def run(study: Path, output: Path, replace: bool, quiet: bool) -> None:
    """Do the whole job and write a report, tables, figures and the fit."""
    from bayeslca.study.job import run_study

    outcome = run_study(study, output, replace=replace, quiet=quiet)
    _print(outcome.words if not quiet else outcome.place)
    if not outcome.trustworthy:
        sys.exit(1)


@commands.command()
@click.argument("results", type=_FILE)
@click.argument("file", type=_FILE)
@click.option("-o", "--output", type=_FILE, required=True, help="CSV file to write.")
@click.option("--sheet", help="Sheet of a workbook (its name, or its number from 1).")
@click.option("--at-most", type=float, help="Place a case where the expected cost is at most this.")
@click.option("--replace", is_flag=True, help="Overwrite the output if it is there.")
def assign(
    results: Path,
    file: Path,
    output: Path,
    sheet: str | None,
    at_most: float | None,
    replace: bool,
) -> None:
    """Give the class membership of new cases from a finished run."""
    from bayeslca.study.assign import assign_new_cases

    _print(
        assign_new_cases(
            results, file, output, sheet=_sheet(sheet), at_most=at_most, replace=replace
        )
    )


@commands.command()
@click.argument("results", type=_FILE)
@click.argument("statements", nargs=-1, required=True)
def ask(results: Path, statements: tuple[str, ...]) -> None:
    """Test a hypothesis, or compute a quantity, on a finished run."""
    from bayeslca.study.ask import ask as ask_of_results

    _print(ask_of_results(results, *statements))


def _sheet(sheet: str | None) -> str | int | None:
    return int(sheet) if sheet is not None and sheet.isdigit() else sheet


def _print(text: str) -> None:
    click.echo(text.rstrip("\n"))


def main() -> None:
    """Run the command line and leave with its exit code."""
    # The matrices are small: threads that wait for each other cost more than they save, most of
    # all on a busy machine. NumPy reads this when it is loaded; the user's own setting is kept.
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    try:
        commands.main(standalone_mode=False)
    except click.exceptions.Exit as leaving:
        sys.exit(leaving.exit_code)
    except click.ClickException as error:
        error.show()
        sys.exit(INPUT_IS_WRONG)
    except (KeyboardInterrupt, click.Abort):
        click.echo("interrupted; nothing was written", err=True)
        sys.exit(INTERRUPTED)
    except BayesLCAError as error:
        click.echo(f"error: {error}", err=True)
        sys.exit(INPUT_IS_WRONG)
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        sys.exit(0)
    except Exception as error:
        _report_our_fault(error)
        sys.exit(OUR_FAULT)


def _report_our_fault(error: Exception) -> None:
    """Say that the fault is ours; the traceback only when asked for."""
    if os.environ.get("BAYESLCA_TRACEBACK"):
        traceback.print_exc()
    click.echo(
        f"fault of bayeslca, not of your input: {type(error).__name__}: {error}\n"
        "Set BAYESLCA_TRACEBACK=1 and run again for the details to report.",
        err=True,
    )


if __name__ == "__main__":
    main()
