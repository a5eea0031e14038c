"""The one place where functions are compiled: numba's decorator with this package's settings."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar, cast

import numba

SETTINGS: dict[str, Any] = {"nogil": True, "error_model": "numpy", "boundscheck": False}

Function = TypeVar("Function", bound=Callable[..., Any])


def compiled(function: Function) -> Function:
    """Compile a function of arrays with numba: no lock held, cached on disk, typed for mypy.

    Results do not depend on the machine's choice of fused operations more than NumPy's do:
    ``fastmath`` stays off. numba's cache looks at a file's own time only, so a change in a file
    of compiled functions that others call needs their caches removed too.
    """
    return cast(Function, numba.njit(cache=True, **SETTINGS)(function))


def compiled_inline(function: Function) -> Function:
    """Compile like `compiled`, and write the body into every compiled caller.

    For functions that take a `Layout`: handing such a tuple over counts references to each of
    its arrays, which costs as much as two dozen random numbers.
    """
    return cast(Function, numba.njit(cache=True, inline="always", **SETTINGS)(function))


def compiled_part(function: Function) -> Function:
    """Compile a function that only compiled functions call: no entry from Python is built."""
    decorate = numba.njit(no_cpython_wrapper=True, no_cfunc_wrapper=True, **SETTINGS)
    return cast(Function, decorate(function))
