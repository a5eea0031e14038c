"""The whole job: from a study file to a folder of results."""

from __future__ import annotations

import json
import shutil
import textwrap
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

import bayeslca
from bayeslca.posterior.storage import save
from bayeslca.relate.predictors.words import headlines
from bayeslca.relate.weighted.words import posterior_in_words
from bayeslca.report.content import ReportContent
from bayeslca.report.sections.outcomes import outcome_lead
from bayeslca.report.sections.theory import outcome_in_words
from bayeslca.report.wording import sentence
from bayeslca.study.asked_in_vain import refuse_asked_in_vain
from bayeslca.study.changes import changes_since
from bayeslca.study.claims import check_theory
from bayeslca.study.fit_checks import record_of
from bayeslca.study.group_comparison import FILES as GROUP_FITS
from bayeslca.study.load import Study, load_study
from bayeslca.study.outcomes import check_outcomes, memberships_moved
from bayeslca.study.parts import Run, with_all_parts
from bayeslca.study.placing import check_placing
from bayeslca.study.predictors import check_predictors
from bayeslca.study.progress import JobProgress, job_progress
from bayeslca.study.results import RECORD, previous_results, written_aside
from bayeslca.study.sample_design import record_of_design
from bayeslca.study.steps import OWN_FIT, UNIT_FITS, Steps, count_fit, step_key

if TYPE_CHECKING:
    import pandas as pd

    from bayeslca.assess.comparison.compare import Comparison
    from bayeslca.posterior.posterior import Posterior


@dataclass(frozen=True)
class Outcome:
    """How a run ended.

    Attributes
    ----------
    words : str
        What was found and where the report is, for the terminal.
    place : str
        Where the report is.
    trustworthy : bool
        False when the fits that the answer rests on are not to be trusted.
    """

    words: str
    place: str
    trustworthy: bool


def run_study(
    path: str | Path, folder: str | Path, *, replace: bool = False, quiet: bool = False
) -> Outcome:
    """Do what a study file says and write the results.

    Parameters
    ----------
    path : str or Path
        The study file.
    folder : str or Path
        Where the results go; made if it is not there.
    replace : bool
        Renew results that stand there already. Fits whose data, model and sampling have not
        changed are kept, and the report shows what moved.
    quiet : bool
        No progress on the terminal.

    Raises
    ------
    BayesLCAError
        When the study, the answers or the model are wrong, or the folder may not be written.
    """
    folder = Path(folder)
    previous = previous_results(folder, replace=replace)
    study = load_study(path)
    check_theory(study)
    check_outcomes(study)
    check_placing(study)
    refuse_asked_in_vain(study)
    check_predictors(study)
    steps = Steps(previous)
    fits = len(study.said.class_count.compare) + (study.model is not None)
    fits += 2 * study.said.groups.compare_free + 2 * study.said.groups.compare_pooled
    with job_progress(fits, quiet=quiet) as progress:
        own = _own_posterior(study, steps, progress)
        comparison = _compared(study, steps, own, progress)
        answer = _answer(own, comparison)
        content = _content(study, folder, steps, answer, comparison)
        content = with_all_parts(Run(study, steps, progress), content)
        progress.say("Writing the report")
    with written_aside(folder) as aside:
        headline = _write(aside, study, content, steps, answer)
    trusted = _trusted(answer.main, comparison, answer.alternatives)
    return _outcome(folder, headline, content, steps, trusted)


def _content(
    study: Study,
    folder: Path,
    steps: Steps,
    answer: _Answer,
    comparison: Comparison | None,
) -> ReportContent:
    """Return what the report is made from, before the parts add theirs."""
    return ReportContent(
        responses=study.responses,
        posterior=answer.main,
        title=study.said.study.title,
        question=study.said.study.question,
        chosen_because=study.said.model.chosen_because,
        comparison=comparison,
        study_row=_study_row(study, answer.rests_on),
        alternatives=answer.alternatives,
        diagnostic=study.said.study.diagnostic,
        interval=study.said.report.interval,
        show_cases=study.said.report.show_cases,
        decisions=_decisions(study),
        seed=study.said.sampling.seed,
        command=f"bayeslca run {study.path.name} -o {folder.name}",
        study_text=study.text,
        changes=changes_since(steps.previous, answer.main, study.said.report.interval),
        replaced=steps.previous is not None,
    )


def _own_posterior(study: Study, steps: Steps, progress: JobProgress) -> Posterior | None:
    model = study.model
    if model is None:
        return None
    sampling = study.sampling_options
    seed = study.said.sampling.seed
    kept = steps.take(OWN_FIT, step_key(study.responses, model, sampling, seed))
    posterior = kept or model.sample(
        study.responses, seed=seed, progress=progress.of_model("the study's model"), **sampling
    )
    progress.finished(1)
    return posterior


def _compared(
    study: Study, steps: Steps, own: Posterior | None, progress: JobProgress
) -> Comparison | None:
    from bayeslca.assess.comparison.compare import class_count_model, compare_class_counts

    counts = study.said.class_count.compare
    if not counts:
        return None
    sampling = study.sampling_options
    fitted = {}
    for n_classes in counts:
        model = class_count_model(
            study.responses,
            n_classes,
            statements=study.shared_statements,
            **study.pooling(n_classes),
            answered_together=study.shared_together,
        )
        key = step_key(study.responses, model, sampling, study.said.sampling.seed)
        kept = steps.take(count_fit(n_classes), key)
        if kept is not None:
            fitted[n_classes] = kept
    progress.finished(len(fitted))
    named = own if own is not None and not own.model.exploratory else None
    return compare_class_counts(
        study.responses,
        counts,
        statements=study.shared_statements,
        **study.pooling(max(counts)),
        answered_together=study.shared_together,
        seed=study.said.sampling.seed,
        fitted=fitted,
        own=named,
        prior_on_count=study.said.class_count.prior_on_count,
        exact=study.said.class_count.exact,
        folds=study.said.class_count.folds,
        progress=progress.of_comparison,
        **sampling,
    )


@dataclass(frozen=True)
class _Answer:
    """Which fit the answer rests on, by its file, and what else the data support as well."""

    rests_on: str
    main: Posterior
    alternatives: Mapping[str, Posterior]


def _answer(own: Posterior | None, comparison: Comparison | None) -> _Answer:
    if own is not None:
        return _Answer(OWN_FIT, own, {})
    assert comparison is not None  # load_study refuses a study without classes and counts
    tied = [int(row) for row in comparison.table.index[comparison.table["tied"]]]
    alternatives = {
        f"{n} classes" if n > 1 else "1 class": comparison.posteriors[n] for n in tied[1:]
    }
    return _Answer(count_fit(tied[0]), comparison.posteriors[tied[0]], alternatives)


def _study_row(study: Study, rests_on: str) -> int | str | None:
    if study.model is not None and not study.model.exploratory:
        return "this study"
    n_classes = (
        study.model.n_classes
        if study.model is not None
        else int(Path(rests_on).stem.removeprefix("classes-"))
    )
    return n_classes if n_classes in study.said.class_count.compare else None


def _decisions(study: Study) -> tuple[str, ...]:
    return tuple(finding.message for finding in study.responses.findings)


def _trusted(
    main: Posterior, comparison: Comparison | None, alternatives: Mapping[str, Posterior]
) -> bool:
    if not main.diagnostics().trustworthy:
        return False
    if not all(one.diagnostics().trustworthy for one in alternatives.values()):
        return False
    if comparison is None:
        return True
    return bool(np.all(comparison.table.loc[comparison.table["tied"], "trustworthy"]))


def _write(
    folder: Path, study: Study, content: ReportContent, steps: Steps, answer: _Answer
) -> str:
    from bayeslca.report.write import write_report

    written = write_report(content, folder)
    _membership(content).to_csv(folder / "membership.csv", index=False)
    if content.plausible_values is not None:
        content.plausible_values.to_csv(folder / "plausible_values.csv", index=False)
    for file, moved in memberships_moved(content).items():
        moved.to_csv(folder / file, index=False)
    (folder / "fits").mkdir()
    for file, posterior in _fits(study, content, answer).items():
        _keep_fit(folder, file, posterior, steps)
    if answer.rests_on != OWN_FIT:
        shutil.copyfile(folder / answer.rests_on, folder / OWN_FIT)
        steps.keys[OWN_FIT] = steps.keys[answer.rests_on]
    (folder / "study.toml").write_text(study.text, encoding="utf-8")
    record = {
        "bayeslca": bayeslca.__version__,
        "study": study.path.name,
        "seed": content.seed,
        "data_hash": study.responses.data_hash,
        "answer_rests_on": answer.rests_on,
        "headline": written.headline,
        "predictive_checks": record_of(content.checks),
        "sample_design": record_of_design(content.weighted),
        "fits": steps.keys,
        "kept_from_the_run_before": steps.kept,
    }
    (folder / RECORD).write_text(json.dumps(record, indent=2) + "\n", encoding="utf-8")
    return written.headline


def _membership(content: ReportContent) -> pd.DataFrame:
    """Return the membership of each case, and where the study's rule places it."""
    table = content.posterior.membership(interval=content.interval)
    if content.placed is None:
        return table
    return table.join(content.placed.drop(columns="case"))


def _fits(study: Study, content: ReportContent, answer: _Answer) -> dict[str, Posterior]:
    """Return every fit of the run by its file."""
    fits: dict[str, Posterior] = {}
    if answer.rests_on == OWN_FIT:
        fits[OWN_FIT] = answer.main
    if content.comparison is not None:
        for n in study.said.class_count.compare:
            fits[count_fit(n)] = content.comparison.posteriors[n]
    if content.group_comparison is not None:
        for name, file in GROUP_FITS.items():
            fits[file] = content.group_comparison.posteriors[name]
    if content.units is not None:
        for name, file in UNIT_FITS.items():
            if name in content.units.posteriors and content.units.posteriors[name] != answer.main:
                fits[file] = content.units.posteriors[name]
    return fits


def _keep_fit(folder: Path, file: str, posterior: Posterior, steps: Steps) -> None:
    """Copy an unchanged fit byte for byte; save a new one."""
    if file in steps.kept and steps.previous is not None:
        shutil.copyfile(steps.previous.folder / file, folder / file)
    else:
        save(posterior, folder / file, replace=False, per_unit=file == OWN_FIT)


def _outcome(
    folder: Path,
    headline: str,
    content: ReportContent,
    steps: Steps,
    trusted: bool,
) -> Outcome:
    place = str(folder / "report.html")
    lines = [headline]
    if content.weighted is not None:
        lines.append(posterior_in_words(content.weighted, content.interval).replace("%", " %"))
        lines += [finding.message for finding in content.weighted.findings]
        lines.append("What follows is unweighted:")
    if content.comparison is not None:
        lines.append(content.comparison.verdict)
    if content.claims:
        lines.append(outcome_in_words(content.claims))
    if content.quantities is not None:
        lines += [
            f"{row['quantity']}: {row['median']:.3g} ({row['lower']:.3g} to {row['upper']:.3g})"
            for row in content.quantities.to_dict("records")
        ]
    if content.predictors is not None:
        lines.append(" ".join(sentence(t) for t in headlines(content.predictors, content.interval)))
    lines += [outcome_lead(found) for found in content.outcomes]
    lines.append(content.posterior.diagnostics().verdict)
    if content.checks is not None and not content.checks.reproduces:
        lines.append(content.checks.verdict)
    if content.influence is not None and content.influence.findings:
        lines.append(content.influence.verdict)
    found = content.sensitivity
    if found is not None and any(one.level == "warning" for one in found.findings):
        lines.append(found.verdict)
    if steps.kept:
        n_kept, n_all = len(steps.kept), len(steps.keys)
        lines.append(f"Kept from the run before, as nothing changed: {n_kept} of {n_all} fits.")
    if not trusted:
        lines.append("Not to be trusted as it stands: the report says where and why.")
    lines.append(f"Report: {place}")
    return Outcome("\n".join(_wrapped(line) for line in lines), place, trusted)


def _wrapped(line: str) -> str:
    return textwrap.fill(line, width=79, break_long_words=False, break_on_hyphens=False)
