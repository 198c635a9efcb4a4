"""Random numbers that stay the same: one stream for each purpose, so that adding one moves no other."""

from __future__ import annotations

import numpy as np
from scipy.special import ndtri

SEED = 20310401


def stream(purpose: int, seed: int = SEED) -> np.random.Generator:
    """Return the random stream of one purpose."""
    return np.random.Generator(np.random.PCG64([seed, purpose]))


def normal(rng: np.random.Generator, shape: int | tuple[int, ...]) -> np.ndarray:
    """Standard normal numbers by the inverse of the distribution, which no release of NumPy can change."""
    return ndtri(rng.random(shape))


def field(purpose: int, km: np.ndarray, n_days: int, reach_km: float, memory: float, seed: int = SEED) -> np.ndarray:
    """Weather-like noise: standard normal, alike at near places and on near days.

    Parameters
    ----------
    purpose : int
        Stream.
    km : ndarray, shape (place, 2)
        East and north.
    n_days : int
    reach_km : float
        Distance over which the correlation falls to 1/e.
    memory : float
        Correlation from one day to the next.
    seed : int

    Returns
    -------
    ndarray, shape (day, place)
    """
    apart = np.hypot(*(km[:, None, :] - km[None, :, :]).transpose(2, 0, 1))
    root = np.linalg.cholesky(np.exp(-apart / reach_km) + 1e-9 * np.eye(len(km)))
    fresh = normal(stream(purpose, seed), (n_days, len(km))) @ root.T
    values = fresh.copy()
    for day in range(1, n_days):
        values[day] = memory * values[day - 1] + np.sqrt(1.0 - memory**2) * fresh[day]
    return values
