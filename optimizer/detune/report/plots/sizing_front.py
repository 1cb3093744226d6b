"""The front of a sizing study: two traded objectives, the third as the size of the dot."""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from detune.ground.units import show
from detune.report.plots.style import BLUE, GREY, VERMILION, Floats, Titles
from detune.report.tables_sizing import GOALS, goal_text
from detune.sizing.made_parts import sizing_of
from detune.study.size import SizingResult

if TYPE_CHECKING:
    from matplotlib.figure import Figure

TITLE = "Front"
UNIT = {"cost": "currency of the lists", "separation": "-", "added-mass": "kg", "worst-response": "-",
        "stiffness": "N/m", "damping": "N s/m or -"}  # fmt: skip


@dataclass(frozen=True)
class FrontData:
    """Objectives (F, k) of the points of the front, their hover texts, and the answer's own (k,)."""

    trade: tuple[str, ...]
    values: Floats
    texts: tuple[str, ...]
    answer: tuple[float, ...]
    worth: str


def data(result: SizingResult) -> FrontData | None:
    """Return the numbers of the plot, None where there is no front."""
    front = result.front
    if front is None or not front.points:
        return None
    unknowns = sizing_of(result.study.brief).unknown
    texts = []
    for point in front.points:
        sized = ", ".join(
            f"{u.title} {show(v, u.unit)}" for u, v in zip(unknowns, point.values.tolist(), strict=True)
        )
        texts.append(
            ", ".join(f"{GOALS[n]} {goal_text(n, point.objectives[n])}" for n in front.trade) + f": {sized}"
        )
    values = np.array([[point.objectives[name] for name in front.trade] for point in front.points])
    best = min(front.points, key=lambda p: p.objectives[front.trade[0]])
    return FrontData(
        front.trade, values, tuple(texts), tuple(best.objectives[name] for name in front.trade), front.worth
    )


def caption(data: FrontData) -> str:
    """Return what the plot shows, in words."""
    text = (
        f"Each dot is a design that no other one beats in {', '.join(GOALS[name] for name in data.trade)}. "
    )
    if len(data.trade) == 3:
        text += f"The lines join designs of nearly equal {GOALS[data.trade[2]]}; the larger the dot, the more of it. "
    return text + f"What the points are worth: {data.worth}."


def size(data: FrontData) -> tuple[float, float]:
    """Return width and height in inches."""
    return 8.6, 4.6


def draw(data: FrontData, figure: "Figure") -> Titles:
    """Draw the front and return the hover texts of its dots."""
    ax = figure.add_axes((0.09, 0.12, 0.88, 0.84))
    a, b = data.trade[:2]
    sizes = np.full(len(data.values), 26.0)
    if len(data.trade) == 3:
        third = data.values[:, 2]
        span = float(third.max() - third.min())
        share = (third - third.min()) / span if span > 0.0 else np.zeros(len(third))
        sizes = 14.0 + 70.0 * share
        for low in np.linspace(0.0, 0.875, 8):
            chosen = (share >= low) & (share <= low + 0.125)
            order = np.argsort(data.values[chosen, 0], kind="stable")
            line = data.values[chosen][order]
            ax.plot(line[:, 0], line[:, 1], color=GREY, linewidth=0.5, zorder=1)
    else:
        order = np.argsort(data.values[:, 0], kind="stable")
        ax.plot(data.values[order, 0], data.values[order, 1], color=GREY, linewidth=0.8, zorder=1)
    drawn = ax.scatter(
        data.values[:, 0], data.values[:, 1], s=sizes, facecolors="none", edgecolors=BLUE, zorder=3
    )
    drawn.set_gid("points")
    ax.plot([data.answer[0]], [data.answer[1]], marker="D", color=VERMILION, markersize=6, zorder=4)
    ax.annotate(
        f"least {GOALS[a]}",
        (data.answer[0], data.answer[1]),
        xytext=(8, 7),
        textcoords="offset points",
        fontsize=8,
    )
    ax.set_xlabel(f"{GOALS[a]} [{UNIT[a]}]")
    ax.set_ylabel(f"{GOALS[b]} [{UNIT[b]}]")
    return {"points": data.texts}
