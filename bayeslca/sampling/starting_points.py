"""Starting points: scattered short runs, sorted into modes, and what was dropped."""

from __future__ import annotations

from dataclasses import dataclass

from bayeslca._typing import Floats, Ints


@dataclass(frozen=True, eq=False)
class StartingPoints:
    """Where the chains began, and what the short runs before them found.

    Attributes
    ----------
    log_posterior : ndarray of float64, shape (n,)
        Log posterior (class summed out) of each short run: mean over its last half.
    mode : ndarray of int64, shape (n,)
        Mode of each short run; 0 is the best, then by falling log posterior.
    n_modes : int
        Number of modes within ``reach`` of the best.
    kept : ndarray of int64, shape (chains,)
        The short run that each chain goes on from.
    dropped : tuple of int
        Modes that no chain goes on from.
    best : float
        Log posterior of the best mode.
    reach : float
        Modes at most so many nats below the best keep a chain.
    """

    log_posterior: Floats
    mode: Ints
    n_modes: int
    kept: Ints
    dropped: tuple[int, ...]
    best: float
    reach: float = 10.0
