"""What all plots share: colours that hold for colour-blind readers and in grey print, fonts, label spacing."""

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from matplotlib.axes import Axes

Floats = NDArray[np.float64]
Titles = dict[str, tuple[str, ...]]

# Okabe and Ito, Color Universal Design (2008).
BLACK = "#000000"
ORANGE = "#E69F00"
SKY = "#56B4E9"
GREEN = "#009E73"
BLUE = "#0072B2"
VERMILION = "#D55E00"
PURPLE = "#CC79A7"
GREY = "#767676"
LIGHT = "#E4E4E4"
LINES: tuple[tuple[str, Any], ...] = (
    (BLUE, "-"),
    (VERMILION, (0, (6, 2))),
    (GREEN, (0, (1, 1.4))),
    (BLACK, (0, (6, 2, 1, 2))),
    (PURPLE, (0, (3, 1.5))),
    (ORANGE, (0, (8, 2, 1, 2, 1, 2))),
    (SKY, (0, (10, 3))),
    (GREY, "-"),
)
RESOLUTION = 130
WIDTH = 8.6


def settings() -> dict[str, Any]:
    """Return the settings under which every plot is drawn."""
    return {
        "font.family": ["DejaVu Sans"],
        "font.size": 9.0,
        "axes.titlesize": 9.0,
        "axes.labelsize": 9.0,
        "xtick.labelsize": 8.0,
        "ytick.labelsize": 8.0,
        "axes.linewidth": 0.7,
        "axes.spines.top": False,
        "axes.spines.right": False,
        "xtick.major.width": 0.7,
        "ytick.major.width": 0.7,
        "svg.fonttype": "none",
        "text.parse_math": False,
        "axes.unicode_minus": False,
        "path.simplify": True,
    }


def spread(wanted: Sequence[float], gap: float, low: float, high: float) -> list[float]:
    """Return positions near the wanted ones, in the same order, at least `gap` apart and between low and high.

    Where there is no room for all, they are laid out evenly.
    """
    count = len(wanted)
    if count == 0:
        return []
    if gap * (count - 1) >= high - low:
        order = np.argsort(np.asarray(wanted), kind="stable")
        even = np.empty(count)
        even[order] = np.linspace(low, high, count) if count > 1 else [min(max(wanted[0], low), high)]
        return [float(value) for value in even]
    order = np.argsort(np.asarray(wanted), kind="stable")
    placed = np.clip(np.asarray(wanted, dtype=float)[order], low, high)
    for i in range(1, count):
        placed[i] = max(placed[i], placed[i - 1] + gap)
    placed[-1] = min(placed[-1], high)
    for i in range(count - 2, -1, -1):
        placed[i] = min(placed[i], placed[i + 1] - gap)
    result = np.empty(count)
    result[order] = placed
    return [float(value) for value in result]


def revolutions_above(ax: "Axes", label: bool = True) -> None:
    """Put a scale of rev/min on top of an axis of speed in Hz, whose limits are final."""
    low, high = ax.get_xlim()
    step = _round_step(60.0 * (high - low) / 8.0)
    transform = ax.get_xaxis_transform()
    ax.plot([low, high], [1.0, 1.0], transform=transform, color=BLACK, linewidth=0.7, clip_on=False)
    ticks = np.arange(np.ceil(60.0 * low / step), np.floor(60.0 * high / step) + 1.0) * step
    ax.plot(ticks / 60.0, np.ones(len(ticks)), transform=transform, linestyle="none", marker=2, markersize=3.5,
            color=BLACK, markeredgewidth=0.7, clip_on=False)  # fmt: skip
    for tick in ticks:
        ax.annotate(f"{tick:g}", (tick / 60.0, 1.0), xycoords=transform, xytext=(0, 5), textcoords="offset points",
                    ha="center", va="bottom", fontsize=7.5, annotation_clip=False)  # fmt: skip
    if label:
        ax.annotate("rev/min", (0.5, 1.0), xycoords="axes fraction", xytext=(0, 17), textcoords="offset points",
                    ha="center", va="bottom", fontsize=8.0, annotation_clip=False)  # fmt: skip


def _round_step(wanted: float) -> float:
    decade = 10.0 ** np.floor(np.log10(wanted))
    return float(next(step * decade for step in (1.0, 2.0, 5.0, 10.0) if step * decade >= wanted * 0.999))


def shorten(text: str, length: int) -> str:
    """Return a text cut to a length."""
    return text if len(text) <= length else text[: length - 1].rstrip() + "…"
