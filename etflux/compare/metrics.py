"""How well numbers of a run agree with measured ones: one published measure per function.

Every function takes modelled and measured values of one shape and uses the pairs in which both are known; NaN where
there are too few of them.

References
----------
.. [W81] Willmott (1981), On the validation of models, Physical Geography 2, 184-194.
.. [E03] Eisenhauer (2003), Regression through the origin, Teaching Statistics 25, 76-80.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np
from numpy.typing import ArrayLike


def _pairs(modelled: ArrayLike, measured: ArrayLike) -> tuple[np.ndarray, np.ndarray]:
    """Both as arrays of the pairs that are known."""
    model, truth = np.asarray(modelled, float).ravel(), np.asarray(measured, float).ravel()
    known = np.isfinite(model) & np.isfinite(truth)
    return model[known], truth[known]


def number(modelled: ArrayLike, measured: ArrayLike) -> float:
    """Pairs that are known.

    Examples
    --------
    >>> number([1.0, float("nan"), 3.0], [1.0, 2.0, 2.0])
    2.0
    """
    return float(len(_pairs(modelled, measured)[0]))


def bias(modelled: ArrayLike, measured: ArrayLike) -> float:
    """Mean of modelled minus measured, in their unit.

    Examples
    --------
    >>> bias([2.0, 4.0], [1.0, 4.0])
    0.5
    """
    model, truth = _pairs(modelled, measured)
    return float(np.mean(model - truth)) if len(model) else np.nan


def rmse(modelled: ArrayLike, measured: ArrayLike) -> float:
    """Root of the mean squared difference, in their unit.

    Examples
    --------
    >>> rmse([1.0, 4.0], [1.0, 2.0]) == 2.0**0.5
    True
    """
    model, truth = _pairs(modelled, measured)
    return float(np.sqrt(np.mean((model - truth) ** 2))) if len(model) else np.nan


def r_squared(modelled: ArrayLike, measured: ArrayLike) -> float:
    """Square of the linear correlation; NaN with under three pairs or where one side does not vary.

    Examples
    --------
    >>> round(r_squared([1.0, 2.0, 3.0], [2.0, 4.0, 6.0]), 12)
    1.0
    """
    model, truth = _pairs(modelled, measured)
    if len(model) < 3:
        return np.nan
    a, b = model - model.mean(), truth - truth.mean()
    spread = float(np.sum(a * a) * np.sum(b * b))
    return float(np.sum(a * b) ** 2 / spread) if spread > 0.0 else np.nan


def slope_through_origin(modelled: ArrayLike, measured: ArrayLike) -> float:
    """Slope of modelled against measured by least squares, the line led through the origin [E03]_.

    Examples
    --------
    >>> slope_through_origin([2.0, 4.0], [1.0, 2.0])
    2.0
    """
    model, truth = _pairs(modelled, measured)
    square = float(np.sum(truth * truth))
    return float(np.sum(model * truth) / square) if square > 0.0 else np.nan


def index_of_agreement(modelled: ArrayLike, measured: ArrayLike) -> float:
    """Willmott's index of agreement d, 0 (none) to 1 [W81]_.

    Examples
    --------
    >>> index_of_agreement([1.0, 2.0, 3.0], [1.0, 2.0, 3.0])
    1.0
    """
    model, truth = _pairs(modelled, measured)
    if len(model) < 2:
        return np.nan
    mean = truth.mean()
    most = float(np.sum((np.abs(model - mean) + np.abs(truth - mean)) ** 2))
    return float(1.0 - np.sum((model - truth) ** 2) / most) if most > 0.0 else np.nan


def outside_band(modelled: ArrayLike, low: ArrayLike, high: ArrayLike) -> np.ndarray:
    """How far values lie outside a band, by the value: 0 inside, negative below; NaN where one is not known.

    Examples
    --------
    >>> outside_band([1.0, 3.0, 6.0], [2.0, 2.0, 2.0], [4.0, 4.0, 4.0])
    array([-1.,  0.,  2.])
    """
    value, least, most = (np.asarray(part, float) for part in (modelled, low, high))
    return np.minimum(value - least, 0.0) + np.maximum(value - most, 0.0)


METRICS: Mapping[str, Callable[[ArrayLike, ArrayLike], float]] = {
    "n": number,
    "bias": bias,
    "rmse": rmse,
    "r_squared": r_squared,
    "slope_through_origin": slope_through_origin,
    "index_of_agreement": index_of_agreement,
}


def scores(modelled: ArrayLike, measured: ArrayLike) -> dict[str, float]:
    """Every measure of :data:`METRICS` for one set of pairs."""
    return {name: measure(modelled, measured) for name, measure in METRICS.items()}
