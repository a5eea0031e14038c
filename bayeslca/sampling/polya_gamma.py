"""Draws of Polya-Gamma variables. Numba code: import inside functions.

PG(n, c) is the variable that makes a binomial logit likelihood Gaussian given it: with
omega ~ PG(n, psi), exp(psi)^y / (1 + exp(psi))^n is proportional to the mean over omega of
exp((y - n / 2) psi - omega psi^2 / 2).

References
----------
Polson, N. G., Scott, J. G. & Windle, J. (2013). Bayesian inference for logistic models using
Polya-Gamma latent variables. Journal of the American Statistical Association 108, 1339-1349,
section 4: the exponential and inverse-Gaussian envelope of Devroye, cut at 0.64.
"""

from __future__ import annotations

import math

import numpy as np

from bayeslca.sampling.compiled import compiled_part

CUT = 0.64
"""Where the two halves of the envelope meet."""


@compiled_part
def polya_gamma(n: int, c: float, rng: np.random.Generator) -> float:
    """Draw from PG(n, c), n a whole number: the sum of n draws from PG(1, c)."""
    half = 0.5 * abs(c)
    rate = 0.125 * math.pi**2 + 0.5 * half * half
    right = _share_right_of_cut(half, rate)
    total = 0.0
    for _ in range(n):
        total += _jacobi(half, rate, right, rng)
    return 0.25 * total


@compiled_part
def _share_right_of_cut(half: float, rate: float) -> float:
    """Return the envelope's mass to the right of the cut, over all of it."""
    log_right = math.log(rate) + rate * CUT
    root = math.sqrt(1.0 / CUT)
    left = math.exp(min(log_right - half, 700.0)) * _normal(root * (CUT * half - 1.0))
    if half < 30.0:  # beyond, the second part is negligible beside the first
        left += math.exp(log_right + half) * _normal(-root * (CUT * half + 1.0))
    return 1.0 / (1.0 + 4.0 / math.pi * left)


@compiled_part
def _normal(x: float) -> float:
    return 0.5 * math.erfc(-x * math.sqrt(0.5))


@compiled_part
def _jacobi(half: float, rate: float, right: float, rng: np.random.Generator) -> float:
    """Draw from the tilted Jacobi distribution J*(1, half) by the alternating series."""
    while True:
        if rng.random() < right:
            x = CUT + rng.standard_exponential() / rate
        else:
            x = _inverse_gaussian_below_cut(half, rng)
        term = _coefficient(0, x)
        height = rng.random() * term
        n = 0
        while True:
            n += 1
            if n % 2 == 1:
                term -= _coefficient(n, x)
                if height <= term:
                    return float(x)
            else:
                term += _coefficient(n, x)
                if height > term:
                    break


@compiled_part
def _coefficient(n: int, x: float) -> float:
    """Return the n-th term of the series for the density of J*(1, 0)."""
    at = n + 0.5
    if x > CUT:
        return math.pi * at * math.exp(-0.5 * (at * math.pi) ** 2 * x)
    return float(math.pi * at * (2.0 / (math.pi * x)) ** 1.5 * math.exp(-2.0 * at * at / x))


@compiled_part
def _inverse_gaussian_below_cut(half: float, rng: np.random.Generator) -> float:
    """Draw from the inverse Gaussian with mean 1 / half and shape 1, below the cut."""
    if half * CUT < 1.0:  # the mean lies beyond the cut: from the limit of infinite mean
        while True:
            one, two = rng.standard_exponential(), rng.standard_exponential()
            while one * one > 2.0 * two / CUT:
                one, two = rng.standard_exponential(), rng.standard_exponential()
            x = CUT / (1.0 + CUT * one) ** 2
            if rng.random() <= math.exp(-0.5 * half * half * x):
                return x
    mean = 1.0 / half
    while True:
        square = rng.standard_normal() ** 2
        x = mean + 0.5 * mean * mean * square
        x -= 0.5 * mean * math.sqrt(4.0 * mean * square + (mean * square) ** 2)
        if rng.random() > mean / (mean + x):
            x = mean * mean / x
        if x <= CUT:
            return float(x)
