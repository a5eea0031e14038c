"""Versions of what made a posterior, for its record."""

from __future__ import annotations

import platform
from importlib.metadata import PackageNotFoundError, version

PACKAGES = ("bayeslca", "numpy", "scipy", "numba", "arviz-stats", "pymc", "nutpie")


def versions_now() -> dict[str, str]:
    """Return the versions of Python and of the packages that results may depend on."""
    found = {"python": platform.python_version()}
    for name in PACKAGES:
        try:
            found[name] = version(name)
        except PackageNotFoundError:
            continue
    return found
