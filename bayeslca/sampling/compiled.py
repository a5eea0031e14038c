"""The one place where functions are compiled: numba's decorator with this package's settings."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar, cast

import numba

Function = TypeVar("Function", bound=Callable[..., Any])

SETTINGS: dict[str, Any] = {"nogil": True, "error_model": "numpy", "boundscheck": False}
"""No lock held, so that chains run on threads. ``fastmath`` stays off: sums keep their order."""

KERNEL_FILES = (
    "compiled",
    "layout",
    "bounds_layout",
    "split",
    "truncated",
    "bounded_blocks",
    "cells",
    "label_move",
    "gibbs",
    "bounded_gibbs",
    "joint_kernel",
    "pool_layout",
    "pooled_step",
    "pooled_gibbs",
    "outcome_forms",
    "outcome_density",
    "slice_step",
    "outcome_regression",
    "outcome_draws",
    "polya_gamma",
    "logistic_kernel",
)


def compiled(function: Function) -> Function:
    """Compile a function of arrays with numba and cache it on disk, typed for mypy."""
    return _cached(function)


def compiled_inline(function: Function) -> Function:
    """Compile like `compiled`, and write the body into every compiled caller.

    For functions that take a `Layout`: handing such a tuple over counts references to each of
    its arrays, which costs as much as two dozen random numbers.
    """
    return _cached(function, inline="always")


def compiled_part(function: Function) -> Function:
    """Compile a function that only compiled functions call: no entry from Python is built."""
    decorate = numba.njit(no_cpython_wrapper=True, no_cfunc_wrapper=True, **SETTINGS)
    return cast(Function, decorate(function))


def _cached(function: Function, **options: str) -> Function:
    dispatcher = numba.njit(cache=True, **options, **SETTINGS)(function)
    # numba renews a cached function when its own file changes, not when a file does whose
    # functions it calls: have it look at all files of the kernel.
    index: Any = getattr(getattr(dispatcher, "_cache", None), "_cache_file", None)
    if hasattr(index, "_source_stamp"):
        index._source_stamp = _stamp(Path(function.__code__.co_filename))
    return cast(Function, dispatcher)


def _stamp(own: Path) -> tuple[tuple[float, int], ...]:
    """Time and size of every file of the kernel, and of the function's own."""
    folder = Path(__file__).parent
    states = [path.stat() for path in (own, *(folder / f"{name}.py" for name in KERNEL_FILES))]
    return tuple((state.st_mtime, state.st_size) for state in states)
