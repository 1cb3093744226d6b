"""The front of a sizing study: the first traded objective across, each of the others up, in a panel of its own."""

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
        text += "The same design stands at the same place across in both panels. "
    return text + f"What the points are worth: {data.worth}."


def size(data: FrontData) -> tuple[float, float]:
    """Return width and height in inches."""
    return 8.6, 4.6 if len(data.trade) == 2 else 6.6


def draw(data: FrontData, figure: "Figure") -> Titles:
    """Draw the front and return the hover texts of its dots."""
    a, *others = data.trade
    titles: Titles = {}
    first = None
    for row, name in enumerate(others):
        place = (0.09, 0.12, 0.88, 0.84) if len(others) == 1 else (0.09, 0.56 - 0.47 * row, 0.88, 0.4)
        ax = figure.add_axes(place, sharex=first)
        first = first or ax
        x, y = data.values[:, 0], data.values[:, row + 1]
        if len(others) == 1:
            # The front of two objectives is a line; of three it is a surface, and a line would say nothing.
            order = np.argsort(x, kind="stable")
            ax.plot(x[order], y[order], color=GREY, linewidth=0.8, zorder=1)
        drawn = ax.scatter(x, y, s=26.0, facecolors="none", edgecolors=BLUE, zorder=3)
        gid = "points" if row == 0 else f"points-{name}"
        drawn.set_gid(gid)
        titles[gid] = data.texts
        ax.plot([data.answer[0]], [data.answer[row + 1]], marker="D", color=VERMILION, markersize=6, zorder=4)
        ax.annotate(
            f"least {GOALS[a]}", (data.answer[0], data.answer[row + 1]), xytext=(8, 7), textcoords="offset points",
            fontsize=8,
        )  # fmt: skip
        ax.set_ylabel(f"{GOALS[name]} [{UNIT[name]}]")
        if row == len(others) - 1:
            ax.set_xlabel(f"{GOALS[a]} [{UNIT[a]}]")
        else:
            ax.tick_params(labelbottom=False)
    return titles
