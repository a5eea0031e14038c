"""The papers that a report cites."""

from __future__ import annotations

REFERENCES: dict[str, str] = {
    "Vermunt 2010": (
        "Vermunt, J. K. (2010). Latent class modeling with covariates: two improved three-step "
        "approaches. Political Analysis 18, 450-469."
    ),
    "Polson, Scott & Windle 2013": (
        "Polson, N. G., Scott, J. G. & Windle, J. (2013). Bayesian inference for logistic models "
        "using Polya-Gamma latent variables. Journal of the American Statistical Association 108, "
        "1339-1349."
    ),
    "Plummer 2015": (
        "Plummer, M. (2015). Cuts in Bayesian graphical models. Statistics and Computing 25, 37-43."
    ),
    "Bolck et al. 2004": (
        "Bolck, A., Croon, M. & Hagenaars, J. (2004). Estimating latent structure models with "
        "categorical variables: one-step versus three-step estimators. Political Analysis 12, 3-27."
    ),
    "Bakk & Vermunt 2016": (
        "Bakk, Z. & Vermunt, J. K. (2016). Robustness of stepwise latent class modeling with "
        "continuous distal outcomes. Structural Equation Modeling 23, 20-31."
    ),
    "Cressie & Read 1984": (
        "Cressie, N. & Read, T. R. C. (1984). Multinomial goodness-of-fit tests. Journal of the "
        "Royal Statistical Society: Series B 46, 440-464."
    ),
    "Binder 1983": (
        "Binder, D. A. (1983). On the variances of asymptotically normal estimators from complex "
        "surveys. International Statistical Review 51, 279-292."
    ),
    "Dong, Elliott & Raghunathan 2014": (
        "Dong, Q., Elliott, M. R. & Raghunathan, T. E. (2014). A nonparametric method to generate "
        "synthetic populations to adjust for complex sampling design features. Survey Methodology "
        "40, 29-46."
    ),
    "Freeman & Tukey 1950": (
        "Freeman, M. F. & Tukey, J. W. (1950). Transformations related to the angular and the "
        "square root. Annals of Mathematical Statistics 21, 607-611."
    ),
    "Gelman et al. (2013)": (
        "Gelman, A., Carlin, J. B., Stern, H. S., Dunson, D. B., Vehtari, A. & Rubin, D. B. "
        "(2013). Bayesian Data Analysis, 3rd ed. CRC Press, section 5.3."
    ),
    "Gelman, Meng & Stern 1996": (
        "Gelman, A., Meng, X.-L. & Stern, H. (1996). Posterior predictive assessment of model "
        "fitness via realized discrepancies. Statistica Sinica 6, 733-807."
    ),
    "Gunawan et al. 2020": (
        "Gunawan, D., Panagiotelis, A., Griffiths, W. & Chotikapanich, D. (2020). Bayesian "
        "weighted inference from surveys. Australian & New Zealand Journal of Statistics 62, "
        "71-94."
    ),
    "Hjort, Dahl & Steinbakk 2006": (
        "Hjort, N. L., Dahl, F. A. & Steinbakk, G. H. (2006). Post-processing posterior predictive "
        "p values. Journal of the American Statistical Association 101, 1157-1174."
    ),
    "Hoffman & Gelman 2014": (
        "Hoffman, M. D. & Gelman, A. (2014). The No-U-Turn sampler: adaptively setting path "
        "lengths in Hamiltonian Monte Carlo. Journal of Machine Learning Research 15, 1593-1623."
    ),
    "Kass & Raftery 1995": (
        "Kass, R. E. & Raftery, A. E. (1995). Bayes factors. Journal of the American Statistical "
        "Association 90, 773-795."
    ),
    "Meng & Wong 1996": (
        "Meng, X.-L. & Wong, W. H. (1996). Simulating ratios of normalizing constants via a simple "
        "identity: a theoretical exploration. Statistica Sinica 6, 831-860."
    ),
    "Kostoulas et al. 2017": (
        "Kostoulas, P., Nielsen, S. S., Branscum, A. J., Johnson, W. O., Dendukuri, N., Dhand, "
        "N. K., Toft, N. & Gardner, I. A. (2017). STARD-BLCM: Standards for the Reporting of "
        "Diagnostic accuracy studies that use Bayesian Latent Class Models. Preventive Veterinary "
        "Medicine 138, 37-47."
    ),
    "Kruschke 2021": (
        "Kruschke, J. K. (2021). Bayesian Analysis Reporting Guidelines. Nature Human Behaviour "
        "5, 1282-1291. doi:10.1038/s41562-021-01177-7"
    ),
    "Depaoli & van de Schoot 2017": (
        "Depaoli, S. & van de Schoot, R. (2017). Improving transparency and replication in "
        "Bayesian statistics: the WAMBS-checklist. Psychological Methods 22, 240-261."
    ),
    "Merkle, Furr & Rabe-Hesketh 2019": (
        "Merkle, E. C., Furr, D. & Rabe-Hesketh, S. (2019). Bayesian comparison of latent variable "
        "models: conditional versus marginal likelihoods. Psychometrika 84, 802-829."
    ),
    "Rao & Wu 1988": (
        "Rao, J. N. K. & Wu, C. F. J. (1988). Resampling inference with complex survey data. "
        "Journal of the American Statistical Association 83, 231-241."
    ),
    "Sivula et al. 2020": (
        "Sivula, T., Magnusson, M., Matamoros, A. A. & Vehtari, A. (2020). Uncertainty in Bayesian "
        "leave-one-out cross-validation based model comparison. arXiv:2008.10296"
    ),
    "Stephens 2000": (
        "Stephens, M. (2000). Dealing with label switching in mixture models. Journal of the Royal "
        "Statistical Society: Series B 62, 795-809."
    ),
    "Vehtari, Gelman & Gabry 2017": (
        "Vehtari, A., Gelman, A. & Gabry, J. (2017). Practical Bayesian model evaluation using "
        "leave-one-out cross-validation and WAIC. Statistics and Computing 27, 1413-1432."
    ),
    "Vehtari et al. 2021": (
        "Vehtari, A., Gelman, A., Simpson, D., Carpenter, B. & Bürkner, P.-C. (2021). "
        "Rank-normalization, folding, and localization: an improved R-hat for assessing "
        "convergence of MCMC. Bayesian Analysis 16, 667-718."
    ),
    "Watanabe 2010": (
        "Watanabe, S. (2010). Asymptotic equivalence of Bayes cross validation and widely "
        "applicable information criterion in singular learning theory. Journal of Machine Learning "
        "Research 11, 3571-3594."
    ),
    "Yao et al. 2018": (
        "Yao, Y., Vehtari, A., Simpson, D. & Gelman, A. (2018). Using stacking to average Bayesian "
        "predictive distributions. Bayesian Analysis 13, 917-1007."
    ),
}
"""Full references by the short form in which the text cites them."""


def cited_in(text: str) -> tuple[str, ...]:
    """Return the full references of the papers that a text cites, in the order of the list."""
    return tuple(full for short, full in REFERENCES.items() if short in text)
