"""Differences between versions of libraries, and nothing else.

PyMC 5.28 hands over arviz's ``InferenceData``, PyMC 6 an xarray ``DataTree``; a step method is
told of a new chain by ``set_rng`` on the one and by ``setup_chain`` on the other. All other code
is the same on both lines.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import xarray as xr


def as_tree(result: Any) -> xr.DataTree:
    """Return what ``pm.sample`` and its kin gave as a DataTree, whatever PyMC's line.

    Parameters
    ----------
    result : DataTree or InferenceData
    """
    tree = result.to_datatree() if hasattr(result, "to_datatree") else result
    return tree  # type: ignore[no-any-return]
