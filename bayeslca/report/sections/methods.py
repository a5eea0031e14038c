"""A methods paragraph to paste into a paper, with its references."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

from bayeslca.report.blocks import Block, Bullets, Paragraph, Section
from bayeslca.report.facts import Facts
from bayeslca.report.references import cited_in
from bayeslca.report.sections import design
from bayeslca.report.sections.assumptions import answers_in_words, model_in_words
from bayeslca.report.sections.outcomes import outcome_lead
from bayeslca.report.sections.sampling import starts_in_words
from bayeslca.report.wording import (
    counted,
    counted_in_words,
    decimal,
    in_words,
    level,
    listed,
    sentence,
    significant,
    whole,
)

if TYPE_CHECKING:
    from bayeslca.assess.comparison.comparison import Comparison

ANCHOR, HEADING = "methods", "A methods paragraph to paste"


def methods_section(facts: Facts, versions: Mapping[str, str]) -> Section:
    """Return the section with the methods paragraph."""
    text = methods_paragraph(facts, versions)
    blocks: list[Block] = []
    if not facts.diagnostics.trustworthy:
        blocks.append(
            Paragraph("Do not use it yet: the sampling behind this report is not to be trusted.")
        )
    blocks += [Paragraph(text), Bullets(tuple((full, "") for full in cited_in(text)))]
    return Section(ANCHOR, HEADING, tuple(blocks))


def methods_paragraph(facts: Facts, versions: Mapping[str, str]) -> str:
    """Return what was done, in the past tense and with its numbers."""
    model = facts.posterior.model
    n_items = counted_in_words(len(model.items), "item")
    kind = "latent class model with " + counted_in_words(model.n_classes, "class", "classes")
    parts = [
        f"The answers of {counted(facts.n_cases, 'case')} to {n_items} were analysed with a "
        f"Bayesian {kind}. {model_in_words(facts)} {answers_in_words(facts)}",
        _priors(facts),
        _sampling(facts),
        _comparison(facts),
        _fit(facts),
        _predictors(facts),
        _outcomes(facts),
        design.method_in_words(facts),
        _software(versions),
    ]
    if model.n_classes > 1:
        parts.append(
            sentence(
                "by posterior medians with equal-tailed "
                f"{level(facts.content.interval)} intervals, "
                f"{facts.answered_in_words}"
            )
        )
    return " ".join(part for part in parts if part)


def _predictors(facts: Facts) -> str:
    """Return how class was related to covariates; empty where it was not."""
    found = facts.content.predictors
    if found is None:
        return ""
    ways = {
        "joint": "jointly with the answers",
        "cut": "by a cut (Plummer 2015)",
        "three_steps": "in three steps with a correction for the error of placement",
    }
    cited = {"fixed_error_likelihood": "Vermunt 2010", "inverse_error_matrix": "Bolck et al. 2004"}
    if found.three_steps is not None:
        ways["three_steps"] += f" ({cited[found.three_steps.correction]})"
    return (
        f"Class was regressed on {listed(found.design.covariates)} by multinomial logistic "
        f"regression, {listed([ways[way] for way in found.ways])}; coefficients of every class had "
        f"normal priors with standard deviation {found.prior_sd[-1]:.3g} (numbers standardised)."
    )


def _priors(facts: Facts) -> str:
    model = facts.posterior.model
    together = f" {_together(facts)}" if model.item_sets else ""
    if not model.statements:
        return f"All priors were uniform.{together}{_spread(facts)}"
    rules = [rule.text for rule in model.naming_rules]
    constraints = [constraint.text for constraint in model.stated.constraints]
    priors = [prior.text for prior in model.stated.priors]
    text = "Priors were uniform"
    if priors:
        sources = dict.fromkeys(
            model.statement_sources[s] for s in priors if s in model.statement_sources
        )
        text += f" except for {listed(priors)}"
        text += f" (source: {'; '.join(sources)})" if sources else " (no source was given)"
    text += "."
    if constraints:
        text += (
            f" These were held to be true, and the prior was cut off there: {listed(constraints)}."
        )
    if rules:
        text += f" Classes were named by rule: {listed(rules)}."
    return text + together + _spread(facts)


def _spread(facts: Facts) -> str:
    """Return what the prior on the spread between pooled units was."""
    model = facts.posterior.model
    if not model.pooled:
        return ""
    a, b = model.spread_prior
    return (
        f" The spread between units, (1 + c)^(-1/2) for a concentration of c, had the prior "
        f"Beta({a:g}, {b:g}), after Gelman et al. (2013)."
    )


def _together(facts: Facts) -> str:
    """Return the priors of items that are answered together."""
    model = facts.posterior.model
    parts = []
    for one in model.item_sets:
        names = listed([model.items[j].name for j in one.items])
        numbers = dict.fromkeys(
            f"{significant(prior[0])} for each" if len(set(prior)) == 1 else
            f"parameters {', '.join(f'{a:g}' for a in prior)}"
            for prior in one.priors.values()
        )  # fmt: skip
        parts.append(f"The joint answers to {names} had a Dirichlet prior with {listed(numbers)}.")
    return " ".join(parts)


def _sampling(facts: Facts) -> str:
    draws, diagnostics = facts.posterior.draws, facts.diagnostics
    if draws.sampler == "nuts":
        how = "the No-U-Turn sampler (Hoffman & Gelman 2014)"
    else:
        how = "blocked Gibbs sampling with a move that permutes the classes"
    text = (
        f"The posterior was sampled by {how}, with {counted_in_words(draws.n_chains, 'chain')} of "
        f"{whole(draws.sweeps)} iterations, of which the first {whole(draws.warmup)} were thrown "
        f"away and {counted(draws.n_draws, 'draw')} per chain were kept. "
        f"{starts_in_words(facts)}"
    )
    if facts.posterior.model.exploratory and len(facts.class_names) > 1:
        text += (
            " The classes were matched across draws by their membership probabilities "
            "(Stephens 2000)."
        )
    table = diagnostics.table
    if {"r_hat", "ess_bulk", "ess_tail"} <= set(table.columns):
        table = table[table["note"] == ""]  # constants and empty classes do not count
        worst = table["r_hat"].max()
        fewest = min(table["ess_bulk"].min(), table["ess_tail"].min())
        text += (
            " Convergence was judged by rank-normalised R-hat and by bulk and tail effective "
            f"sample sizes (Vehtari et al. 2021): the largest R-hat was {decimal(worst, 3)}, the "
            f"smallest effective sample size {whole(fewest)}."
        )
    return text


def _comparison(facts: Facts) -> str:
    comparison = facts.content.comparison
    if comparison is None:
        return ""
    text = (
        f"{in_words(len(comparison.table)).capitalize()} models were compared by the leave-one-out "
        "predictive accuracy of a case's answers, class summed out (Merkle, Furr & Rabe-Hesketh "
        f"2019), estimated by {_left_out_by(comparison)}"
    )
    if comparison.folds is not None:
        text += f", by {counted(comparison.folds.folds, 'fold')} of cases"
    if "waic" in comparison.table:
        text += ", by WAIC (Watanabe 2010)"
    if "weight" in comparison.table:
        text += " and by stacking weights (Yao et al. 2018)"
    return f"{text}. {sentence(comparison.verdict)}"


def _left_out_by(comparison: Comparison) -> str:
    loos = list(comparison.loo.values())
    refitted = [loo.refitted for loo in loos if loo.refitted is not None]
    if refitted and len(refitted) == len(loos) and all(rows.all() for rows in refitted):
        return "refits without one case of each response pattern"
    importance = "Pareto-smoothed importance sampling (Vehtari, Gelman & Gabry 2017)"
    if any(rows.any() for rows in refitted):
        return f"{importance}, with refits where that is not reliable"
    return importance


def _fit(facts: Facts) -> str:
    checks = facts.content.checks
    if checks is None:
        return ""
    text = (
        f"Fit was judged by {whole(checks.replicates)} replicates from the posterior predictive "
        "distribution, with discrepancies at the same parameters on both sides (Gelman, Meng & "
        "Stern 1996)"
    )
    if checks.calibrated_in:
        studies = counted(checks.calibrated_in, "simulated study", "simulated studies")
        text += f", calibrated by {studies} (Hjort, Dahl & Steinbakk 2006)"
    return f"{text}. {sentence(checks.verdict)}"


def _outcomes(facts: Facts) -> str:
    content = facts.content
    if not content.outcomes:
        return ""
    done = {way for found in content.outcomes for way in found.ways}
    papers = {
        "joint": "jointly with the answers",
        "cut": "by a cut, with classes as the answers alone make them (Plummer 2015)",
        "inverse_error_matrix": "in three steps by the inverse error matrix (Bolck et al. 2004)",
        "fixed_error_likelihood": "in three steps by a likelihood with the error of placement held "
        "fixed (Vermunt 2010; Bakk & Vermunt 2016)",
    }
    ways = listed([text for way, text in papers.items() if way in done])
    leads = " ".join(sentence(outcome_lead(one, content.interval)) for one in content.outcomes)
    return f"Outcomes were related to class {ways}. {leads}"


def _software(versions: Mapping[str, str]) -> str:
    others = [f"{name} {number}" for name, number in versions.items() if name != "bayeslca"]
    own = versions.get("bayeslca", "")
    return f"Computations were done with bayeslca {own} ({', '.join(others)})."
