"""Beta variates between bounds: exact rejection, one way for each kind of interval.

Where the interval straddles the mean, plain Betas are tried until one lies inside. In a tail, an
exponential that touches the log density at the end nearest the mode is an envelope. Where the
interval is narrow around the mode, a uniform is. With a parameter below 1 the density has a pole
at an end: the power that makes it is drawn on the interval, the other factor accepts. Between 1
and 2 tries as a rule, whatever the bounds' probability. Numba code: import inside functions.
"""

from __future__ import annotations

import math

import numpy as np

from bayeslca.sampling.compiled import compiled_part

PLAIN_TRIES = 8
"""Plain Betas are tried so often before another way is gone."""

NARROW = 3.0
"""An interval of fewer standard deviations is narrow."""


@compiled_part
def truncated_beta(
    a: float, b: float, lower: float, upper: float, rng: np.random.Generator
) -> float:
    """Draw a Beta(a, b) variate between two bounds.

    Parameters
    ----------
    a, b : float
        Positive.
    lower, upper : float
        0 <= lower < upper <= 1; where rounding has left no room, their middle is returned.
    rng : numpy.random.Generator
    """
    if upper - lower < 1e-15:
        return 0.5 * (lower + upper)
    mean = a / (a + b)
    narrow = NARROW * math.sqrt(a * b / (a + b + 1.0)) / (a + b)
    if lower < mean < upper and (upper - lower > narrow or a < 1.0 or b < 1.0):
        for _ in range(PLAIN_TRIES):
            x = rng.standard_gamma(a)
            x /= x + rng.standard_gamma(b)
            if lower < x < upper:
                return x
    if a < 1.0 or b < 1.0:
        return _with_pole(a, b, lower, upper, rng)
    mode = (a - 1.0) / (a + b - 2.0) if a + b > 2.0 else 0.5
    if mode <= lower:
        return _in_tail(a, b, lower, upper, rng)
    if mode >= upper:
        return 1.0 - _in_tail(b, a, 1.0 - upper, 1.0 - lower, rng)
    return _around_mode(a, b, mode, lower, upper, upper - lower < 2.0 * narrow, rng)


@compiled_part
def _log_density(a: float, b: float, x: float) -> float:
    """Return the log density up to a constant; no power of 0 counts where it is the zeroth."""
    value = 0.0
    if a != 1.0:
        value += (a - 1.0) * (math.log(x) if x > 0.0 else -math.inf)
    if b != 1.0:
        value += (b - 1.0) * (math.log1p(-x) if x < 1.0 else -math.inf)
    return value


@compiled_part
def _in_tail(a: float, b: float, lower: float, upper: float, rng: np.random.Generator) -> float:
    """Draw above the mode (a, b >= 1): the log density is concave and falls from ``lower`` on."""
    slope = 0.0
    if a != 1.0:
        slope += (a - 1.0) / max(lower, 1e-300)
    if b != 1.0:
        slope -= (b - 1.0) / (1.0 - lower)
    rate = max(-slope, 0.0)
    width = upper - lower
    at_lower = _log_density(a, b, max(lower, 1e-300))
    mass = -math.expm1(-rate * width)
    while True:
        if rate * width < 1e-10:
            step = width * rng.random()
        else:
            step = -math.log1p(-rng.random() * mass) / rate
        x = min(lower + step, upper)
        log_ratio = _log_density(a, b, x) - at_lower + rate * step
        if math.log1p(-rng.random()) <= log_ratio:
            return x


@compiled_part
def _around_mode(
    a: float,
    b: float,
    mode: float,
    lower: float,
    upper: float,
    narrow: bool,
    rng: np.random.Generator,
) -> float:
    """Draw where the mode lies inside (a, b >= 1): from a uniform if narrow, else plain Betas."""
    highest = _log_density(a, b, mode)
    while True:
        if narrow:
            x = lower + (upper - lower) * rng.random()
            if math.log1p(-rng.random()) <= _log_density(a, b, x) - highest:
                return x
        else:
            x = rng.standard_gamma(a)
            x /= x + rng.standard_gamma(b)
            if lower < x < upper:
                return x


@compiled_part
def _with_pole(a: float, b: float, lower: float, upper: float, rng: np.random.Generator) -> float:
    """Draw with a parameter below 1."""
    if a >= 1.0:
        return 1.0 - _pole_at_zero(b, a, 1.0 - upper, 1.0 - lower, rng)
    if b >= 1.0:
        return _pole_at_zero(a, b, lower, upper, rng)
    return _two_poles(a, b, lower, upper, rng)


@compiled_part
def _pole_at_zero(
    a: float, b: float, lower: float, upper: float, rng: np.random.Generator
) -> float:
    """Draw with a < 1 <= b: both factors fall.

    Where (1 - x)^(b - 1) falls faster, an exponential no steeper than the log density anywhere
    on the interval is the envelope; else the power is drawn and the other factor accepts.
    """
    width = upper - lower
    if lower * (b - 1.0) > (1.0 - a) * (1.0 - lower):
        rate = (1.0 - a) / upper + (b - 1.0) / (1.0 - lower)
        mass = -math.expm1(-rate * width)
        at_lower = _log_density(a, b, lower)
        while True:
            step = -math.log1p(-rng.random() * mass) / rate
            x = min(lower + step, upper)
            if math.log1p(-rng.random()) <= _log_density(a, b, x) - at_lower + rate * step:
                return x
    while True:
        x = _power(a, lower, upper, rng)
        if math.log1p(-rng.random()) <= (b - 1.0) * (math.log1p(-x) - math.log1p(-lower)):
            return x


@compiled_part
def _two_poles(a: float, b: float, lower: float, upper: float, rng: np.random.Generator) -> float:
    """Draw with a, b < 1: each half of the interval by the power of its own pole."""
    if upper <= 0.5:
        return _half(a, b, lower, upper, rng)
    if lower >= 0.5:
        return 1.0 - _half(b, a, 1.0 - upper, 1.0 - lower, rng)
    left = _power_mass(a, lower) * 0.5 ** (b - 1.0)
    right = _power_mass(b, 1.0 - upper) * 0.5 ** (a - 1.0)
    while True:
        if rng.random() * (left + right) < left:
            x = _power(a, lower, 0.5, rng)
            if rng.random() * 0.5 ** (b - 1.0) <= (1.0 - x) ** (b - 1.0):
                return x
        else:
            y = _power(b, 1.0 - upper, 0.5, rng)
            if rng.random() * 0.5 ** (a - 1.0) <= (1.0 - y) ** (a - 1.0):
                return 1.0 - y


@compiled_part
def _half(a: float, b: float, lower: float, upper: float, rng: np.random.Generator) -> float:
    """Draw with a, b < 1 and no upper bound above 1/2: the other factor varies by 2 at most."""
    while True:
        x = _power(a, lower, upper, rng)
        if rng.random() * (1.0 - upper) ** (b - 1.0) <= (1.0 - x) ** (b - 1.0):
            return x


@compiled_part
def _power_mass(a: float, lower: float) -> float:
    """Return the integral of x^(a - 1) from a bound to 1/2."""
    return float((0.5**a - lower**a) / a)


@compiled_part
def _power(a: float, lower: float, upper: float, rng: np.random.Generator) -> float:
    """Draw from the density x^(a - 1) between two bounds."""
    low = (lower / upper) ** a
    x = upper * (low + rng.random() * (1.0 - low)) ** (1.0 / a)
    return float(min(max(x, lower), upper))
