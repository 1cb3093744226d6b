"""Margins: one convention everywhere, dimensionless, positive = met."""

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


def upper_margin(value: Floats, limit: Floats) -> Floats:
    """Return limit / value - 1. A value of zero or less has an infinite margin; a limit of zero has -1 if exceeded.

    A value without bound has -1, except where the limit is infinite, which is none. A value that is not a number
    has a margin that is none.
    """
    value, limit = np.broadcast_arrays(np.asarray(value, float), np.asarray(limit, float))
    margin = np.where(np.isnan(value), np.nan, np.inf)
    np.divide(limit, value, out=margin, where=(value > 0.0) & ~np.isinf(limit))
    return margin - 1.0


def lower_margin(value: Floats, limit: Floats) -> Floats:
    """Return value / limit - 1. A limit of zero is met by any value of zero or more, infinitely so above zero.

    A limit below zero bounds the size of a value below zero (tension of a part that may pull): it is
    judged as an upper limit on that size, limit / value - 1.
    """
    value, limit = np.broadcast_arrays(np.asarray(value, float), np.asarray(limit, float))
    at_zero = np.where(value > 0.0, np.inf, np.where(value < 0.0, -np.inf, 1.0))
    at_zero = np.where(np.isneginf(limit) & ~np.isnan(value), np.inf, at_zero)
    ratio = np.where(np.isnan(value), np.nan, at_zero)
    np.divide(value, limit, out=ratio, where=limit > 0.0)
    ratio = np.where((limit < 0.0) & (value >= 0.0), np.inf, ratio)
    np.divide(limit, value, out=ratio, where=(limit < 0.0) & (value < 0.0))
    return ratio - 1.0


def window_margin(value: Floats, lower: Floats | None, upper: Floats | None) -> Floats:
    """Return the lesser of the lower and the upper margin; None is no limit."""
    margin = np.full(np.shape(value), np.inf)
    if lower is not None:
        margin = np.minimum(margin, lower_margin(value, lower))
    if upper is not None:
        margin = np.minimum(margin, upper_margin(value, upper))
    return margin
