"""Quantiles of a few values.

numpy's own median and percentile load its masked arrays at their first call, which takes longer than
hearing a tone.
"""

import numpy as np
from numpy.typing import ArrayLike


def quantile(values: ArrayLike, share: float) -> float:
    """Return the value that a share (0 to 1) of the values lie under, between neighbours on a line."""
    ordered = np.sort(np.asarray(values, np.float64), axis=None)
    return float(np.interp(share * (len(ordered) - 1), np.arange(len(ordered)), ordered))


def median(values: ArrayLike) -> float:
    """Return the middle of the values."""
    return quantile(values, 0.5)
