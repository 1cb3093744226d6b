"""The nondominated among points with several objectives."""

import numpy as np
from numpy.typing import NDArray

from detune.brief.choice import LARGER_IS_BETTER

Floats = NDArray[np.float64]


def as_minimised(objectives: dict[str, Floats], trade: tuple[str, ...]) -> Floats:
    """Return the traded objectives (D, k) with every one to be made small."""
    return np.stack(
        [-objectives[name] if LARGER_IS_BETTER[name] else objectives[name] for name in trade], axis=1
    )


def nondominated(values: Floats) -> NDArray[np.intp]:
    """Return the indices of the nondominated rows of (D, k), all to be made small, in lexicographic order.

    Of equal rows the first stays. After sorting, a row can only be dominated by an earlier one.
    """
    order = np.lexsort((np.arange(len(values)), *values.T[::-1]))
    front: list[int] = []
    for index in order:
        if front:
            kept = values[front]
            if bool(np.any(np.all(kept <= values[index], axis=1))):
                continue
        front.append(int(index))
    return np.array(front, dtype=np.intp)
