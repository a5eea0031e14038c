"""Words for Bayes factors; they never replace the number.

References
----------
Kass, R. E. & Raftery, A. E. (1995). Bayes factors. Journal of the American Statistical
Association 90, 773-795, section 3.2: grades by twice the natural log.
"""

from __future__ import annotations

import math

SOURCE = "Kass & Raftery (1995)"
GRADES = (
    (1.0, "not worth more than a bare mention"),
    (3.0, "positive"),
    (5.0, "strong"),
    (math.inf, "very strong"),
)
"""Upper ends on the scale of the natural log (half of theirs), and the words."""


def grade(log_bayes_factor: float) -> str:
    """Return the grade of a Bayes factor in words.

    Examples
    --------
    >>> grade(2.0)
    'positive evidence for it'
    >>> grade(-7.0)
    'very strong evidence against it'
    """
    if math.isnan(log_bayes_factor):
        return "no evidence either way"
    size = abs(log_bayes_factor)
    words = next(words for end, words in GRADES if size <= end)
    if words == GRADES[0][1]:
        return words
    return f"{words} evidence {'for' if log_bayes_factor > 0 else 'against'} it"


def bayes_factor_text(log_bayes_factor: float) -> str:
    """Return a Bayes factor as a reader writes it: 35, 0.02, 3.2e+08.

    Examples
    --------
    >>> bayes_factor_text(math.log(7.96))
    '7.96'
    >>> bayes_factor_text(30.0)
    '1.1e+13'
    """
    if math.isinf(log_bayes_factor):
        return "infinite" if log_bayes_factor > 0 else "0"
    power = log_bayes_factor / math.log(10.0)
    if abs(power) < 4:
        return f"{math.exp(log_bayes_factor):.3g}"
    whole = math.floor(power)
    return f"{10.0 ** (power - whole):.1f}e{whole:+03d}"
