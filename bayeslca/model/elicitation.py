"""From an expert's judgement to a Beta prior."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from scipy.special import betainc, betaincc, betaincinv

from bayeslca.exceptions import ModelError

LARGEST = 1e9
"""Pseudo-cases beyond which a judgement is taken for a slip."""
Side = Literal["above", "below"]


@dataclass(frozen=True, slots=True)
class BetaDescription:
    """What a Beta prior says.

    Attributes
    ----------
    a, b : float
    lower, median, upper : float
        Its 5, 50 and 95 % points.
    """

    a: float
    b: float
    lower: float
    median: float
    upper: float

    @property
    def distribution(self) -> str:
        """The distribution as a statement has it."""
        return f"Beta({self.a:.4g}, {self.b:.4g})"

    def statement(self, probability: str) -> str:
        """Return the statement to paste, for a probability such as ``P(fees=yes | managed)``."""
        return f"{probability} ~ {self.distribution}"

    def __str__(self) -> str:
        return (
            f"{self.distribution}: half of it lies below {self.median:.2f}, 90 % between "
            f"{self.lower:.2f} and {self.upper:.2f}"
        )


def describe_beta(a: float, b: float) -> BetaDescription:
    """Say what a Beta prior says: its 5, 50 and 95 % points.

    Examples
    --------
    >>> print(describe_beta(9, 2))
    Beta(9, 2): half of it lies below 0.84, 90 % between 0.61 and 0.96
    """
    lower, median, upper = (float(betaincinv(a, b, share)) for share in (0.05, 0.5, 0.95))
    return BetaDescription(float(a), float(b), lower, median, upper)


def beta_from_most_likely(
    most_likely: float,
    *,
    above: float | None = None,
    below: float | None = None,
    sure: float,
) -> tuple[float, float]:
    """Find the Beta prior with a most likely value and a bound held with a stated sureness.

    Parameters
    ----------
    most_likely : float
        The mode, from 0 to 1.
    above, below : float
        One of them: the probability is above (below) it ...
    sure : float
        ... with this probability, such as 0.95.

    Returns
    -------
    tuple of float
        The parameters (a, b), both at least 1.

    Raises
    ------
    ModelError
        When no such Beta exists; the message says what would be possible.

    Notes
    -----
    With mode m the family is Beta(1 + m c, 1 + (1 - m) c). From c = 0, the uniform, c is doubled
    until the bound is held surely enough; the root is within the last step. When several c hold
    the bound, the smallest (the vaguest prior) is the answer.

    References
    ----------
    .. [1] Suess, Gardner & Johnson (2002), Hierarchical Bayesian model for prevalence inferences
       and determination of a country's status for an animal pathogen, Preventive Veterinary
       Medicine 55.
    .. [2] Branscum, Gardner & Johnson (2005), Estimation of diagnostic-test sensitivity and
       specificity through Bayesian modeling, Preventive Veterinary Medicine 68.

    Examples
    --------
    >>> a, b = beta_from_most_likely(0.55, below=0.85, sure=0.95)
    >>> round(a, 2), round(b, 2)
    (2.82, 2.49)
    """
    from scipy.optimize import brentq  # slow to import, and seldom needed

    side, bound = _one_bound(above, below)
    _check(most_likely, side, bound, sure)

    def parameters(cases: float) -> tuple[float, float]:
        return 1.0 + most_likely * cases, 1.0 + (1.0 - most_likely) * cases

    def excess(cases: float) -> float:
        mass = betaincc if side == "above" else betainc
        return float(mass(*parameters(cases), bound)) - sure

    most = 1.0
    while excess(most) < 0.0:
        most *= 2.0
        if most > LARGEST:
            msg = (
                f"most_likely={most_likely:g} and {side}={bound:g} with sure={sure:g} need a "
                "prior that outweighs any data. Move the bound away from the most likely value, "
                "or be less sure."
            )
            raise ModelError(msg)
    return parameters(brentq(excess, 0.0 if most == 1.0 else most / 2.0, most, xtol=1e-12))


def _one_bound(above: float | None, below: float | None) -> tuple[Side, float]:
    if above is not None and below is None:
        return "above", above
    if below is not None and above is None:
        return "below", below
    msg = "a Beta prior from a most likely value needs one bound. Give either above or below."
    raise ModelError(msg)


def _check(most_likely: float, side: Side, bound: float, sure: float) -> None:
    if not 0.0 <= most_likely <= 1.0:
        msg = f"most_likely={most_likely:g} is no probability. Give a number from 0 to 1."
        raise ModelError(msg)
    if not 0.0 < bound < 1.0:
        msg = f"{side}={bound:g} bounds nothing. Give a number between 0 and 1."
        raise ModelError(msg)
    if not 0.0 < sure < 1.0:
        msg = (
            f"sure={sure:g} is not a degree of sureness. Give a number between 0 and 1, "
            "such as 0.95."
        )
        raise ModelError(msg)
    wrong_side = bound >= most_likely if side == "above" else bound <= most_likely
    if wrong_side:
        other, smaller = ("below", "smaller") if side == "above" else ("above", "larger")
        msg = (
            f"{side}={bound:g} excludes the most likely value, {most_likely:g}. Give a {smaller} "
            f"bound, or write {other}={bound:g}."
        )
        raise ModelError(msg)
    uniform = 1.0 - bound if side == "above" else bound
    if sure <= uniform:
        msg = (
            f"sure={sure:g} asks for less than the uniform prior gives: it is {side} {bound:g} "
            f"with probability {uniform:g}. Give a sure larger than {uniform:g}, move the bound "
            "towards the most likely value, or write Beta(1, 1)."
        )
        raise ModelError(msg)
