"""Drawing responses from a model: from its prior, or from given parameters."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, TypeVar

import numpy as np

from bayeslca._typing import Bools, Floats, Ints, Seed
from bayeslca.exceptions import ModelError
from bayeslca.model.joint_answers import joints
from bayeslca.model.places import ConditionalVector, ResponseVector, Vector
from bayeslca.model.prevalence import PrevalenceSource
from bayeslca.model.probabilities import draw_elements, response_probability, row_probability
from bayeslca.model.table import Table
from bayeslca.model.truncated_prior import draw_inside
from bayeslca.responses.responses import Responses
from bayeslca.responses.units import MISSING

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel

Entry = TypeVar("Entry")


@dataclass(frozen=True, eq=False)
class Parameters:
    """One value of all parameters of a model.

    Attributes
    ----------
    elements : ndarray, shape (E,)
        The blocks of the model's table, end to end.
    prevalence : ndarray, shape (groups, K)
    """

    elements: Floats
    prevalence: Floats


@dataclass(frozen=True, eq=False)
class Simulation:
    """Responses drawn from a model, with what they were drawn from.

    Attributes
    ----------
    responses : Responses
    latent_class : ndarray of int, shape (case,)
        The class of each case.
    parameters : Parameters
    """

    responses: Responses
    latent_class: Ints
    parameters: Parameters


def simulate(
    model: LatentClassModel,
    n: int | Sequence[int],
    seed: Seed = None,
    parameters: Parameters | None = None,
    answered: Bools | None = None,
) -> Simulation:
    """Draw responses from a model.

    Parameters
    ----------
    model : LatentClassModel
    n : int or sequence of int
        Number of cases; with groups, of each group (a single number is divided evenly).
    seed : int or numpy Generator, optional
    parameters : Parameters, optional
        What to draw from; drawn from the prior when left out.
    answered : ndarray of bool, shape (case, item), optional
        Which answers are given; all when left out.
    """
    rng = np.random.default_rng(seed)
    table = model.table
    if parameters is None:
        parameters = draw_parameters(table, model.prevalence_source, rng)
    group = np.repeat(np.arange(model.n_groups), group_sizes(n, model.n_groups))
    latent_class = draw_classes(parameters.prevalence, group, rng)
    codes = draw_answers(table, parameters.elements, latent_class, group, rng)
    if answered is not None:
        if answered.shape != codes.shape:
            msg = (
                f"answered has the shape {answered.shape}, but there are {codes.shape[0]} cases "
                f"and {codes.shape[1]} items. Give one row per case and one column per item."
            )
            raise ModelError(msg)
        codes = np.where(answered, codes, MISSING).astype(np.int16)
    responses = Responses(
        items=model.items,
        codes=codes,
        counts=np.ones(group.size, dtype=np.int64),
        groups=model.groups,
        group_codes=group.astype(np.int32),
        source="simulated",
    )
    return Simulation(responses, latent_class, parameters)


def draw_parameters(table: Table, source: PrevalenceSource, rng: np.random.Generator) -> Parameters:
    """Draw all parameters from the prior, bounds kept."""
    if table.is_bounded:
        return Parameters(draw_inside(table, 1, rng)[0], source.simulate(rng))
    return Parameters(draw_elements(table, rng), source.simulate(rng))


def draw_classes(prevalence: Floats, group: Ints, rng: np.random.Generator) -> Ints:
    """Draw the class (n,) of cases in groups (n,) from prevalences (groups, K)."""
    return draw_categories(prevalence[group], rng)


def draw_answers(
    table: Table, elements: Floats, latent_class: Ints, group: Ints, rng: np.random.Generator
) -> Ints:
    """Draw the answers of cases of known class.

    Parameters
    ----------
    table : Table
    elements : ndarray, shape (E,)
    latent_class, group : ndarray of int, shape (n,)
    rng : numpy Generator

    Returns
    -------
    ndarray of int16, shape (n, J)
        A category for every case and item.
    """
    at = (table.response_group[group], latent_class)
    probability = response_probability(table, elements)
    codes = np.empty((latent_class.size, table.n_items), dtype=np.int16)
    for item in range(table.n_items):
        columns = slice(table.item_start[item], table.item_start[item + 1])
        codes[:, item] = draw_categories(probability[:, :, columns][at], rng)
    by_class = np.swapaxes(row_probability(table, elements)[table.joint_row], -1, -2)
    for joint in joints(table):
        if joint.is_whole:
            answer = draw_categories(by_class[:, :, joint.columns][at], rng)
            codes[:, list(joint.items)] = np.stack(np.unravel_index(answer, joint.sizes), axis=1)
    return codes


def parameters_from(
    model: LatentClassModel,
    prevalence: Floats | Sequence[float] | Mapping[str, float],
    response_probability: Mapping[str, Mapping[str, float | Sequence[float]]],
    joint_answers: Mapping[tuple[str, ...], Mapping[str, Any]] | None = None,
) -> Parameters:
    """Put prevalences and response probabilities into the form that ``simulate`` takes.

    Parameters
    ----------
    model : LatentClassModel
        A model that ties and fixes no response probability. All groups get the same.
    prevalence : mapping from class to probability, or array of shape (K,) or (groups, K)
    response_probability : mapping from item to mapping from class to probability
        Of all the item's categories in order, or of yes (or the last) for a binary item. Classes
        in which the item is answered together with others may be left out.
    joint_answers : mapping from items to mapping from class to array, optional
        Of each set that is answered together, in the order of its items: the probability of each
        joint answer, an axis for each item.
    """
    if isinstance(prevalence, Mapping):
        prevalence = [_entry(prevalence, name, "prevalence") for name in model.class_names]
    shares = np.broadcast_to(
        np.asarray(prevalence, dtype=np.float64), (model.n_groups, model.n_classes)
    )
    _check_simplex(shares, "the prevalences")
    tied = model.response_assumptions.tied
    if any(tied.reasons):
        msg = "this model ties or fixes probabilities; give its elements in Parameters instead."
        raise ModelError(msg)
    known: dict[Vector, Floats] = {}
    for g in range(model.n_response_groups):
        known |= _known_alone(model, g, response_probability)
        known |= _known_jointly(model, g, joint_answers or {})
    elements = np.full(model.table.n_elements, np.nan)
    for place, form in tied.forms.items():
        elements[list(form.elements)] = known[place.vector][place.category]
    return Parameters(elements, shares.copy())


def _known_alone(
    model: LatentClassModel,
    group: int,
    response_probability: Mapping[str, Mapping[str, float | Sequence[float]]],
) -> dict[Vector, Floats]:
    out: dict[Vector, Floats] = {}
    in_sets = {(j, k) for one in model.item_sets for j in one.items for k in one.classes}
    for j, item in enumerate(model.items):
        for k, name in enumerate(model.class_names):
            if (j, k) in in_sets:
                continue
            by_class = _entry(response_probability, item.name, "response_probability")
            value = np.atleast_1d(_entry(by_class, name, f"response_probability['{item.name}']"))
            if value.size == 1 and item.n_categories == 2:
                yes = item.categories.index(item.yes) if item.yes else 1
                value = np.where(np.arange(2) == yes, value[0], 1.0 - value[0])
            if value.size != item.n_categories:
                msg = f"item '{item.name}' has {item.n_categories} categories; {name} got "
                msg += f"{value.size} probabilities. Give one for each category, in order."
                raise ModelError(msg)
            _check_simplex(value, f"the answers to '{item.name}' in class '{name}'")
            out[ResponseVector(group, j, k)] = value
    return out


def _known_jointly(
    model: LatentClassModel, group: int, joint_answers: Mapping[tuple[str, ...], Mapping[str, Any]]
) -> dict[Vector, Floats]:
    out: dict[Vector, Floats] = {}
    for s, one in enumerate(model.item_sets):
        names = tuple(model.items[j].name for j in one.items)
        if names not in joint_answers:
            msg = f"joint_answers has no entry for {names}, which are answered together. Add one."
            raise ModelError(msg)
        for k in one.classes:
            name = model.class_names[k]
            value = np.asarray(_entry(joint_answers[names], name, f"joint_answers[{names}]"))
            if value.shape != one.sizes:
                msg = (
                    f"joint_answers[{names}] in class '{name}' has the shape {value.shape}; it "
                    f"needs an axis for each item, {one.sizes}."
                )
                raise ModelError(msg)
            _check_simplex(value.ravel(), f"the joint answers to {names} in class '{name}'")
            joint = value.reshape(one.sizes[0], -1)
            alone = joint.sum(axis=1)
            out[ResponseVector(group, one.first, k)] = alone
            for a, row in enumerate(joint):
                even = np.full(row.size, 1.0 / row.size)  # where the first answer is never given
                given = row / alone[a] if alone[a] > 0 else even
                out[ConditionalVector(group, s, k, a)] = given
    return out


def _entry(mapping: Mapping[str, Entry], name: str, where: str) -> Entry:
    if name not in mapping:
        msg = f"{where} has no entry for '{name}'; it has {', '.join(mapping)}. Add one."
        raise ModelError(msg)
    return mapping[name]


def _check_simplex(values: Floats, what: str) -> None:
    if np.any(values < 0) or not np.allclose(values.sum(axis=-1), 1.0):
        msg = f"{what} must be probabilities that sum to 1; got {np.asarray(values).tolist()}."
        raise ModelError(msg)


def group_sizes(n: int | Sequence[int], n_groups: int) -> list[int]:
    """Return the cases of each group; a single number is divided evenly."""
    if isinstance(n, int | np.integer):
        return [n // n_groups + (g < n % n_groups) for g in range(n_groups)]
    sizes = [int(size) for size in n]
    if len(sizes) != n_groups:
        msg = f"n gives {len(sizes)} group sizes, but the model has {n_groups} group(s)."
        raise ModelError(msg)
    return sizes


def draw_categories(probability: Floats, rng: np.random.Generator) -> Ints:
    """Draw a category for each leading place of (..., R); never one of probability 0."""
    cumulated = np.cumsum(probability, axis=-1)
    at = rng.random(cumulated.shape[:-1])[..., None] * cumulated[..., -1:]
    return np.asarray((at >= cumulated).sum(axis=-1))
