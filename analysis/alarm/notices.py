"""What is worth a line on the board and calls nobody: water that leaves the animals' optimal band."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from analysis.arrays import BoolArray


def is_outside_optimal(
    was_outside: ArrayLike,
    *,
    low_value: ArrayLike,
    high_value: ArrayLike,
    optimal_low: ArrayLike,
    optimal_high: ArrayLike,
    deadband: ArrayLike,
) -> BoolArray:
    """Return which tanks are outside the optimal band; the change from False to True is the notice.

    Parameters
    ----------
    was_outside : array_like of bool
        The answer before; held where no sensor is believable, and until the value is back by the deadband.
    low_value, high_value : array_like
        Lowest and highest believable value of each tank; NaN: none. [any]
    optimal_low, optimal_high : array_like
        The optimal band; NaN: no limit. [same]
    deadband : array_like
        0 or more. [same]
    """
    low, high = np.asarray(low_value, dtype=np.float64), np.asarray(high_value, dtype=np.float64)
    was = np.asarray(was_outside, dtype=np.bool_)
    margin = np.where(was, np.asarray(deadband, dtype=np.float64), 0.0)
    below = low < np.asarray(optimal_low) + margin
    above = high > np.asarray(optimal_high) - margin
    outside: BoolArray = np.where(np.isnan(low) | np.isnan(high), was, below | above)
    return outside
