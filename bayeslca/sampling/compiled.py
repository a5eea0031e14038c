"""The one place where functions are compiled: numba's decorator with this package's settings."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar, cast

import numba

Function = TypeVar("Function", bound=Callable[..., Any])


def compiled(function: Function) -> Function:
    """Compile a function of arrays with numba: no lock held, cached on disk, typed for mypy.

    Results do not depend on the machine's choice of fused operations more than NumPy's do:
    ``fastmath`` stays off. numba's cache looks at a file's own time only, so a change in a file
    of compiled functions that others call needs their caches removed too.
    """
    decorate = numba.njit(nogil=True, cache=True, error_model="numpy", boundscheck=False)
    return cast(Function, decorate(function))
