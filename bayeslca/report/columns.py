"""What every column of every table means: heads in words, and one line that explains each."""

from __future__ import annotations

from typing import Literal, NamedTuple

Kind = Literal["text", "share", "count", "number", "flag"]


class Column(NamedTuple):
    """A column of a table.

    Attributes
    ----------
    words : str
        Its head on the page and in the workbook.
    gloss : str
        One line that explains it.
    kind : str
        How its values are written.
    """

    words: str
    gloss: str
    kind: Kind


_STATISTICS = {
    "median": Column("Median", "half of the posterior lies below it", "number"),
    "mean": Column("Mean", "average over the posterior", "number"),
    "sd": Column("Spread", "standard deviation of the posterior", "number"),
    "lower": Column("From", "lower end of the interval", "number"),
    "upper": Column("To", "upper end of the interval", "number"),
    "mcse": Column(
        "Simulation error", "Monte Carlo standard error of the mean; small beside the spread",
        "number",
    ),
    "ess_bulk": Column(
        "Independent draws, middle", "effective sample size of the mean; 1,000 or more is ample",
        "count",
    ),
    "ess_tail": Column(
        "Independent draws, tails", "effective sample size of the interval's ends", "count"
    ),
    "r_hat": Column("R-hat", "1 when chains agree; above 1.01 they do not", "number"),
}  # fmt: skip

COLUMNS: dict[str, Column] = {
    "latent_class": Column("Class", "the class that the row is about", "text"),
    "assigned_class": Column("Placed in", "the most probable class given the answers", "text"),
    "item": Column("Item", "the item's name in the data", "text"),
    "label": Column("Text", "the item's text", "text"),
    "category": Column("Answer", "one of the item's possible answers", "text"),
    "group": Column("Group", "the group of cases", "text"),
    "quantity": Column("Quantity", "what the row is about", "text"),
    "case": Column("Case", "the case's name in the data", "text"),
    "cases": Column("Cases", "number of cases", "count"),
    "count": Column("Cases", "number of cases", "count"),
    "cases_lower": Column("Cases from", "lower end of the interval, in cases", "number"),
    "cases_upper": Column("Cases to", "upper end of the interval, in cases", "number"),
    "note": Column("Note", "why a number is missing", "text"),
    "share": Column("Share", "part of all, between 0 and 1", "share"),
    "missing": Column("Missing", "cases without an answer to the item", "count"),
    **_STATISTICS,
    "prior": Column("Prior", "what was assumed before the answers", "text"),
    "prior_mean": Column("Prior mean", "expected before the answers", "share"),
    "prior_lower": Column("Prior from", "lower end of the prior's interval", "share"),
    "prior_upper": Column("Prior to", "upper end of the prior's interval", "share"),
    "prior_lower_50": Column(
        "Prior from, 50 %", "lower end of the 50 % interval before the data", "number"
    ),
    "prior_upper_50": Column("Prior to, 50 %", "its upper end", "number"),
    "prior_lower_95": Column(
        "Prior from, 95 %", "lower end of the 95 % interval before the data", "number"
    ),
    "prior_upper_95": Column("Prior to, 95 %", "its upper end", "number"),
    "prior_cases": Column(
        "Weight", "the cases that the prior counts for (sum of its parameters)", "number"
    ),
    "prior_share": Column(
        "Share of the prior",
        "weight over weight plus the expected cases that answered; above half, the prior rules",
        "share",
    ),
    "prior_overlap": Column(
        "Overlap with the prior",
        "area that the densities before and after the data share: 1 when the answers changed "
        "nothing, near 0 when they settled the matter",
        "share",
    ),
    "mostly_prior": Column(
        "Mostly prior",
        "overlap of 0.75 or more, or a prior that weighs as much as the expected cases",
        "flag",
    ),
    "kind": Column("Kind", "prevalence, response probability, quantity or hypothesis", "text"),
    "own_prior": Column(
        "Own prior",
        "flat: power scaling cannot see it; informative; partly flat where several play a part",
        "text",
    ),
    "prior_sensitivity": Column(
        "Moves with the priors",
        "power scaling of all stated priors (Kallioinen et al. 2024); 0.05 or more is a sign; "
        "empty where every prior is flat",
        "number",
    ),
    "likelihood_sensitivity": Column(
        "Moves with the data", "power scaling of the likelihood; below 0.05 is a sign", "number"
    ),
    "diagnosis": Column("In words", "what the figures say", "text"),
    "mean_before": Column("Mean as stated", "posterior mean under the study's priors", "number"),
    "moved": Column(
        "Moved",
        "change of the mean in posterior standard deviations under the study's priors",
        "number",
    ),
    "moved_mcse": Column("± of moved", "Monte Carlo error of it", "number"),
    "far": Column("Far", "moved by more than one posterior standard deviation", "flag"),
    "same_places": Column(
        "Same class", "share of the cases whose most probable class stayed", "share"
    ),
    "constraints": Column(
        "Held to", "statements that keep it equal, known, bounded or ordered", "text"
    ),
    "statement": Column("Stated as", "the statement in the study, empty for a default", "text"),
    "source": Column("Source", "where the prior comes from, as the study says", "text"),
    "model": Column("Model", "the number of classes, or the study's own model", "text"),
    "classes": Column("Classes", "the number of classes, or the study's own model", "text"),
    "elpd": Column(
        "Predictive accuracy",
        "expected log predictive density of a new case's answers, summed over cases; higher is "
        "better",
        "number",
    ),
    "elpd_se": Column("± of accuracy", "standard error of the predictive accuracy", "number"),
    "elpd_mcse": Column("Simulation error", "Monte Carlo error of the accuracy", "number"),
    "elpd_diff": Column("Behind the best", "difference in accuracy from the best model", "number"),
    "elpd_diff_se": Column("± of difference", "standard error of the difference", "number"),
    "p_loo": Column("Effective parameters", "flexibility that the answers used up", "number"),
    "pareto_k_high": Column(
        "Unreliable cases", "cases whose leave-one-out figure is not reliable (k too high)", "count"
    ),
    "refitted": Column(
        "Refitted", "patterns that were refitted without one of their cases", "count"
    ),
    "reliable": Column(
        "Reliable",
        "weights with a Pareto k up to 0.7, refits or evidence that can be trusted",
        "flag",
    ),
    "rows": Column("Rows", "of the data, from 1, with these answers", "text"),
    "log_density": Column(
        "Log probability", "of the answers of one such case, given all other cases", "number"
    ),
    "log_density_mcse": Column(
        "Simulation error of it", "Monte Carlo error; empty where it was not refitted", "number"
    ),
    "p_new_case": Column(
        "p",
        "probability that a new case of the group that answered the same items is as improbable",
        "share",
    ),
    "p_replicate": Column(
        "Replicates", "share of replicates of the data that hold a case as improbable", "share"
    ),
    "pareto_k": Column("Pareto k", "of importance weights; above 0.7 they are poor", "number"),
    "largest": Column("Largest change", "of a prevalence, in its posterior sd", "number"),
    "largest_mcse": Column("Simulation error of it", "Monte Carlo error", "number"),
    "waic": Column(
        "WAIC", "accuracy by the widely applicable criterion, on the same scale", "number"
    ),
    "waic_se": Column("± of WAIC", "standard error of WAIC", "number"),
    "p_waic": Column("Effective parameters (WAIC)", "flexibility used up, by WAIC", "number"),
    "weight": Column("Weight", "share in the best mixture of predictions (stacking)", "share"),
    "smallest_class": Column("Smallest class", "prevalence of the smallest class", "share"),
    "smallest_lower": Column("Smallest from", "lower end of its 95 % interval", "share"),
    "smallest_upper": Column("Smallest to", "upper end of its 95 % interval", "share"),
    "smallest_cases": Column("Smallest in cases", "the smallest class, in cases", "number"),
    "separation": Column(
        "Separation", "relative entropy: 1 when every case is placed surely, 0 by chance", "number"
    ),
    "trustworthy": Column("Sampling", "whether the sampling is to be trusted", "flag"),
    "log_evidence": Column(
        "Log evidence", "log probability of all answers under the model, over its priors", "number"
    ),
    "log_evidence_mcse": Column(
        "Simulation error of it", "Monte Carlo standard error of the log evidence", "number"
    ),
    "probability": Column(
        "Probability",
        "of the number of classes, given the answers and the priors, among those whose evidence is "
        "reliable",
        "share",
    ),
    "probability_mcse": Column(
        "± of probability", "Monte Carlo standard error of the probability", "number"
    ),
    "reason": Column("Why not", "why the evidence is not to be trusted", "text"),
    "set": Column("Set", "cases that go together; A is the largest", "text"),
    "patterns": Column("Patterns", "number of distinct response patterns", "count"),
    "together_within": Column(
        "Together", "mean probability that two of the set's cases are in one class", "share"
    ),
    "together_between": Column(
        "With others",
        "mean probability that a case of the set and one of another are in one class",
        "share",
    ),
    "covariate": Column("Covariate", "the covariate, or a column of the regression", "text"),
    "covariate_value": Column("Value", "value of the covariate", "text"),
    "step": Column("Step", "what a step of 1 in the covariate is", "text"),
    "change": Column("Change", "how the covariate changes", "text"),
    "against": Column("Against", "the class of comparison", "text"),
    "class_odds_ratio": Column(
        "Odds ratio", "of the class against the class of comparison, for one step", "number"
    ),
    "class_odds_ratio_lower": Column("Odds ratio from", "lower end of its interval", "number"),
    "class_odds_ratio_upper": Column("Odds ratio to", "upper end of its interval", "number"),
    "probability_above_1": Column(
        "Above 1", "posterior probability that the odds ratio is above 1", "share"
    ),
    "log_odds": Column(
        "Log odds", "change in the log odds of the answer with the covariate, class given", "number"
    ),
    "z": Column("z", "estimate over its standard error", "number"),
    "p_one_test": Column("p, one test", "of this test alone", "share"),
    "p_adjusted": Column("p, all tests", "adjusted for the number of tests (Holm 1979)", "share"),
    "tied": Column("Tie", "too close to the best to tell", "flag"),
    "claim": Column("Claim", "the hypothesis as the study words it", "text"),
    "planned": Column("Planned", "whether it was stated before the answers were seen", "flag"),
    "hypothesis": Column("Hypothesis", "one of the rivals, or none of these", "text"),
    "posterior_probability": Column(
        "Probability after",
        "probability after the data that it holds, under the model; empty for an equality",
        "share",
    ),
    "prior_probability": Column(
        "Probability before", "the same before the data, under the prior", "share"
    ),
    "posterior_mcse": Column("Simulation error after", "Monte Carlo error of it", "number"),
    "prior_mcse": Column("Simulation error before", "Monte Carlo error of it", "number"),
    "log_bayes_factor": Column(
        "Log Bayes factor", "natural log of the Bayes factor against the model", "number"
    ),
    "log_bayes_factor_mcse": Column(
        "Simulation error", "Monte Carlo error of the log Bayes factor", "number"
    ),
    "log_bayes_factor_against_complement": Column(
        "Log Bayes factor against the opposite",
        "natural log of the Bayes factor against the model without the hypothesis",
        "number",
    ),
    "log_bayes_factor_against_complement_mcse": Column(
        "Simulation error (opposite)", "Monte Carlo error of it", "number"
    ),
    "grade": Column("In words", "grade by Kass & Raftery (1995)", "text"),
    "bound": Column(
        "Bound",
        "below or above: too few draws decide, and the Bayes factor is only known to lie there",
        "text",
    ),
    "true_by_definition": Column(
        "By definition", "the model implies it, so that it is no result", "flag"
    ),
    "method": Column("Method", "weighed by evidence, or counted in draws", "text"),
    "prior_weight": Column("Weight before", "prior probability among the rivals", "share"),
    "posterior_weight": Column("Weight after", "posterior probability among the rivals", "share"),
    "text": Column("Formula", "what was computed", "text"),
    "prior_median": Column("Before the data", "median of the prior", "number"),
    "check": Column(
        "Check",
        "g2, x2, power_divergence: response patterns; item_margins, item_pairs, sum_scores, "
        "distinct_patterns",
        "text",
    ),
    "observed": Column("Observed", "as in the answers; of a check, how far off they are", "number"),
    "expected": Column(
        "Expected", "as the model has it; of a check, the mean of replicates", "number"
    ),
    "residual": Column("Residual", "observed less expected, in standard errors", "number"),
    "p": Column("p", "share of replicates that miss by as much as the answers, or more", "share"),
    "p_mcse": Column("± of p", "Monte Carlo error of p", "number"),
    "p_calibrated": Column("Calibrated p", "rank of p among simulated studies", "share"),
    "p_calibrated_mcse": Column("± of calibrated p", "Monte Carlo error of it", "number"),
    "items": Column("Items", "items that are answered together within a class", "text"),
    "joint_answer": Column("Joint answer", "answers given together", "text"),
    "measure": Column(
        "Measure",
        "odds ratio (of ordered items, agreeing over disagreeing pairs of cases), covariance or "
        "correlation of the answers within the class; an odds ratio has no mean to rely on",
        "text",
    ),
    "positive": Column(
        "More than by chance",
        "probability that the measure is above what independent items would give (1 for an odds "
        "ratio, 0 for the others)",
        "share",
    ),
    "item_1": Column("Item", "the first item of the pair", "text"),
    "item_2": Column("Other item", "the second item of the pair", "text"),
    "odds_ratio": Column(
        "Odds ratio", "as observed; of ordered items, concordant over discordant pairs", "number"
    ),
    "odds_ratio_expected": Column("Expected odds ratio", "median of replicates", "number"),
    "odds_ratio_lower": Column("Odds ratio from", "lower end, of replicates", "number"),
    "odds_ratio_upper": Column("Odds ratio to", "upper end, of replicates", "number"),
    "pair_residual": Column(
        "Pair residual",
        "how much more (+) or less (-) the items go together than the classes explain, in standard "
        "errors",
        "number",
    ),
    "log_likelihood": Column(
        "Log likelihood", "log probability of all answers at the maximum", "number"
    ),
    "n_parameters": Column("Free parameters", "shared ones once, known ones not", "count"),
    "df": Column("df", "cells of the cross-table less one a group, less parameters", "count"),
    "g2": Column("G2", "likelihood ratio statistic against the cross-table itself", "number"),
    "g2_p_value": Column("p of G2", "from chi-square; empty where that does not hold", "share"),
    "x2": Column("X2", "Pearson's statistic, of cases that answered all items", "number"),
    "x2_p_value": Column("p of X2", "from chi-square; empty where that does not hold", "share"),
    "aic": Column("AIC", "Akaike 1974; smaller is better", "number"),
    "aicc": Column("AICc", "AIC corrected for few cases: Hurvich & Tsai 1989", "number"),
    "bic": Column("BIC", "Schwarz 1978; smaller is better", "number"),
    "bic_sclove": Column("BIC (Sclove)", "adjusted for sample size: Sclove 1987", "number"),
    "caic": Column("CAIC", "Bozdogan 1987; smaller is better", "number"),
    "relative_entropy": Column(
        "Separation",
        "relative entropy at the maximum: 1 when every case is surely placed",
        "number",
    ),
    "reached_best": Column("Reached the best", "runs of EM that ended at the maximum", "count"),
    "starting_points": Column("Starting points", "runs of EM", "count"),
    "boundary": Column("At 0 or 1", "estimates at the edge of what is possible", "text"),
    "chi_square": Column("Why no p", "why chi-square does not hold", "text"),
    "criterion": Column("Criterion", "aic, aicc, bic, bic_sclove or caic", "text"),
    "value": Column("Value", "smaller is better", "number"),
    "above_best": Column("Above the smallest", "0 for the best model by it", "number"),
    "smaller": Column("Fewer classes", "the model that is tested", "count"),
    "larger": Column("More classes", "the model with one class more", "count"),
    "statistic": Column("Statistic", "twice the difference in log likelihood", "number"),
    "p_value": Column("p, bootstrap", "share of drawn tables with as large a statistic", "share"),
    "p_value_mcse": Column("± of p", "Monte Carlo error of it", "number"),
    "tables_drawn": Column("Tables drawn", "from the model with fewer classes", "count"),
    "adjusted_statistic": Column(
        "Adjusted statistic", "Lo, Mendell & Rubin 2001; doubted by Jeffries 2003", "number"
    ),
    "adjusted_p_value": Column("p, adjusted", "of the adjusted statistic", "share"),
    "weighting": Column("Weighting", "unweighted: the cases are taken as they are", "text"),
    "weighted": Column("Weighted", "median, of the population", "number"),
    "weighted_lower": Column("Weighted from", "lower end of the interval", "number"),
    "weighted_upper": Column("Weighted to", "upper end of the interval", "number"),
    "unweighted": Column("Unweighted", "median, of the cases as they are", "number"),
    "unweighted_lower": Column("Unweighted from", "lower end of the interval", "number"),
    "unweighted_upper": Column("Unweighted to", "upper end of the interval", "number"),
    "design_effect": Column(
        "Design effect",
        "variance over that of as many cases drawn at random one by one; 1 at the least",
        "number",
    ),
    "linearised_design_effect": Column(
        "Design effect, maximum likelihood", "the same from linearised standard errors", "number"
    ),
    "estimate": Column("Estimate", "by maximum likelihood", "number"),
    "standard_error": Column(
        "Standard error", "of the estimate; none where it lies at 0 or 1", "number"
    ),
    "differs": Column(
        "Differs", "the unweighted median lies outside the weighted interval", "flag"
    ),
    "way": Column(
        "Way",
        "joint: the other variables help to shape the classes; cut: they cannot; others: three "
        "steps, by their correction",
        "text",
    ),
    "other_class": Column("Compared with", "the class whose mean is taken off", "text"),
    "probability_larger": Column(
        "Probability that it is larger", "that the first class has the larger mean", "share"
    ),
    "effect": Column(
        "Effect",
        "numeric: difference in standard deviations; binary: odds ratio; count: ratio of means; "
        "ordered: chance that a case of the first class has the higher value",
        "number",
    ),
    "effect_lower": Column("Effect from", "lower end of its interval", "number"),
    "effect_upper": Column("Effect to", "upper end of its interval", "number"),
    "feature": Column("Feature", "of the outcome's values, that is compared", "text"),
    "values": Column("Values", "a range of the outcome's values, or a category", "text"),
    "parameter": Column(
        "Parameter", "standard deviation, size of the negative binomial, or slope", "text"
    ),
    "order": Column("Order", "of class means", "text"),
    "score": Column("Sum score", "yes answers, and steps up of ordered items", "count"),
    "alone": Column(
        "Alone",
        "share that the unit's own cases are most probable under; empty without cases",
        "share",
    ),
    "borrowed": Column(
        "Borrowed", "part of the estimate that comes from all units together, at least", "share"
    ),
    "largest_change": Column(
        "Largest change", "by which any unit's mean prevalence would move", "share"
    ),
    "draws_that_count": Column(
        "Draws that count", "effective number of draws after weighing them anew", "count"
    ),
    "table": Column("Table", "the table that has the column", "text"),
    "column": Column("Column", "the column's name in the files", "text"),
    "words": Column("Head", "the column's head on the page", "text"),
    "meaning": Column("Meaning", "what the column holds", "text"),
}

BY_CLASS = {
    "change_": ("Change of", "prevalence without one such case less that with all, in points"),
    "sd_": ("Change in sd of", "the same in posterior standard deviations"),
}
"""Columns of which each class has one, by how their names start."""


def column(name: str) -> Column:
    """Return what a column means; a column that nobody described is called by its name."""
    for start, (words, gloss) in BY_CLASS.items():
        if name.startswith(start) and name not in COLUMNS:
            return Column(f"{words} {name.removeprefix(start)}", gloss, "number")
    return COLUMNS.get(name, Column(name.replace("_", " "), "", "text"))
