"""The probability of all answers of a unit, its prevalences summed out.

Given mean, spread and response probabilities, the classes of a unit's cases are a Polya urn.
Where the numbers of cases per class are few enough they are gone through exactly; beyond, by
particles that place one case after the other, which gives an unbiased estimate.

References
----------
Kong, A., Liu, J. S. & Wong, W. H. (1994). Sequential imputations and Bayesian missing data
problems. Journal of the American Statistical Association 89, 278-288.
"""

from __future__ import annotations

import math

import numpy as np

from bayeslca._typing import Floats, Ints
from bayeslca.sampling.compiled import compiled

EXACT_WORK = 40_000
"""Products for one draw of one unit up to which all class counts are gone through."""
PARTICLES = 100


def exact_work(n_cases: int, n_classes: int) -> int:
    """Return how many products going through all class counts takes."""
    return int(n_cases * (n_cases + 1) ** (n_classes - 1) * n_classes)


@compiled
def exact_log_likelihood(likelihood: Floats, concentration: Floats, out: Floats) -> None:
    """Go through all numbers of cases per class, exactly.

    Parameters
    ----------
    likelihood : ndarray, shape (S, n, K)
        p(answers of a case | class).
    concentration : ndarray, shape (S, K)
    out : ndarray, shape (S,)
        Written to: log probability of all n cases.
    """
    n_draws, n_cases, n_classes = likelihood.shape
    base = n_cases + 1
    size = base ** (n_classes - 1)
    weight = np.zeros(size)
    rising = np.zeros((n_classes, base))
    for s in range(n_draws):
        weight[:] = 0.0
        weight[0] = 1.0
        log_scale = 0.0
        for i in range(n_cases):
            highest = 0.0
            for k in range(n_classes):
                highest = max(highest, likelihood[s, i, k])
            log_scale += math.log(highest)
            last = likelihood[s, i, n_classes - 1] / highest
            largest = 0.0
            for at in range(size - 1, -1, -1):
                total = last * weight[at]
                stride = 1
                rest = at
                for k in range(n_classes - 1):
                    if rest % base > 0:
                        total += likelihood[s, i, k] / highest * weight[at - stride]
                    rest //= base
                    stride *= base
                weight[at] = total
                largest = max(largest, total)
            for at in range(size):
                weight[at] /= largest
            log_scale += math.log(largest)
        total_concentration = 0.0
        for k in range(n_classes):
            total_concentration += concentration[s, k]
            rising[k, 0] = 0.0
            for j in range(n_cases):
                rising[k, j + 1] = rising[k, j] + math.log(concentration[s, k] + j)
        log_whole = 0.0
        for j in range(n_cases):
            log_whole += math.log(total_concentration + j)
        best = -math.inf
        total = 0.0
        for at in range(size):
            if weight[at] <= 0.0:
                continue
            rest = at
            left = n_cases
            log_term = math.log(weight[at])
            for k in range(n_classes - 1):
                count = rest % base
                rest //= base
                left -= count
                log_term += rising[k, count]
            if left < 0:
                continue
            log_term += rising[n_classes - 1, left]
            if log_term > best:
                total = total * math.exp(best - log_term) + 1.0
                best = log_term
            else:
                total += math.exp(log_term - best)
        out[s] = log_scale + best + math.log(total) - log_whole


@compiled
def particle_log_likelihood(
    likelihood: Floats,
    concentration: Floats,
    particles: int,
    out: Floats,
    rng: np.random.Generator,
) -> None:
    """Place one case after the other, in many particles at once; see `exact_log_likelihood`.

    The estimate of the probability is unbiased. Particles are weighed by the next case before
    they place it, and drawn anew when few of them count.
    """
    n_draws, n_cases, n_classes = likelihood.shape
    counts = np.zeros((particles, n_classes))
    newer = np.zeros((particles, n_classes))
    weight = np.ones(particles)
    for s in range(n_draws):
        counts[:, :] = 0.0
        weight[:] = 1.0
        whole = 0.0
        for k in range(n_classes):
            whole += concentration[s, k]
        log_total = 0.0
        for i in range(n_cases):
            total = 0.0
            for p in range(particles):
                mine = 0.0
                for k in range(n_classes):
                    mine += (concentration[s, k] + counts[p, k]) * likelihood[s, i, k]
                weight[p] *= mine / (whole + i)
                total += weight[p]
                u = rng.random() * mine
                for k in range(n_classes):
                    u -= (concentration[s, k] + counts[p, k]) * likelihood[s, i, k]
                    if u <= 0.0 or k == n_classes - 1:
                        counts[p, k] += 1.0
                        break
            squares = 0.0
            for p in range(particles):
                squares += (weight[p] / total) ** 2
            if squares * particles > 2.0:
                # Few count: systematic resampling, all weights equal afterwards.
                u = rng.random()
                reached = 0.0
                taken = 0
                for p in range(particles):
                    reached += weight[p] / total * particles
                    while taken < particles and u + taken < reached:
                        newer[taken, :] = counts[p, :]
                        taken += 1
                for p in range(taken, particles):
                    newer[p, :] = counts[particles - 1, :]
                counts[:, :] = newer
                log_total += math.log(total / particles)
                weight[:] = 1.0
            elif total < 1e-200:
                log_total += math.log(total / particles)
                weight[:] = weight / (total / particles)
        out[s] = log_total + math.log(weight.sum() / particles)


def log_likelihood_of_unit(
    likelihood: Floats, count: Ints, concentration: Floats, rng: np.random.Generator
) -> tuple[Floats, bool]:
    """Return log p(all answers of a unit | mean, spread, response probabilities).

    Parameters
    ----------
    likelihood : ndarray, shape (S, U, K)
        log p(answers | class) of each distinct answers of the unit.
    count : ndarray of int, shape (U,)
        Cases that gave them.
    concentration : ndarray, shape (S, K)
    rng : numpy.random.Generator

    Returns
    -------
    ndarray, shape (S,)
    bool
        True where it is exact.
    """
    by_case = np.repeat(likelihood, count, axis=1)
    highest = by_case.max(axis=2, keepdims=True)
    scaled = np.ascontiguousarray(np.exp(by_case - highest))
    out = np.empty(len(scaled))
    a = np.ascontiguousarray(concentration)
    exact = exact_work(scaled.shape[1], scaled.shape[2]) <= EXACT_WORK
    if exact:
        exact_log_likelihood(scaled, a, out)
    else:
        particle_log_likelihood(scaled, a, PARTICLES, out, rng)
    return out + highest.sum(axis=(1, 2)), exact
