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
UNIT = {
    "cost": "currency of the study",
    "separation": "-",
    "added-mass": "kg",
    "worst-response": "-",
    "stiffness": "N/mm",
}
SHOWN = {"stiffness": 1e-3}


@dataclass(frozen=True)
class FrontData:
    """Objectives (F, k) of the points of the front as shown, their units and hover texts, and the answer's own (k,)."""

    trade: tuple[str, ...]
    units: tuple[str, ...]
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
    scale = np.array([SHOWN.get(name, 1.0) for name in front.trade])
    values = np.array([[point.objectives[name] for name in front.trade] for point in front.points]) * scale
    best = values[int(np.argmin(values[:, 0] * (-1.0 if front.trade[0] == "separation" else 1.0)))]
    units = tuple(UNIT.get(name) or _damping_unit(result) for name in front.trade)
    return FrontData(front.trade, units, values, tuple(texts), tuple(best.tolist()), front.worth)


def _damping_unit(result: SizingResult) -> str:
    """Viscous damping is summed in N s/m, a loss factor is a ratio; both where groups differ."""
    sizing = sizing_of(result.study.brief)
    kinds = {unknown.kind for unknown in sizing.unknown}
    viscous = "viscous" in kinds or any(made.viscous for made in sizing.made)
    loss = "loss-factor" in kinds or any(made.loss_factor for made in sizing.made)
    return "N s/m or -" if viscous and loss else "N s/m" if viscous else "-"


def caption(data: FrontData) -> str:
    """Return what the plot shows, in words."""
    text = (
        f"Each dot is a design that no other one beats in {', '.join(GOALS[name] for name in data.trade)}. "
    )
    if len(data.trade) == 3:
        text += f"The darker a dot, the {_better(data.trade[0])} its {GOALS[data.trade[0]]}, in every panel. "
    return text + f"What the points are worth: {data.worth}."


def _better(name: str) -> str:
    return "greater" if name == "separation" else "less"


def size(data: FrontData) -> tuple[float, float]:
    """Return width and height in inches."""
    return 8.6, 4.6 if len(data.trade) == 2 else 8.6


def draw(data: FrontData, figure: "Figure") -> Titles:
    """Draw the front and return the hover texts of its dots."""
    titles: Titles = {}
    if len(data.trade) == 2:
        _panel(data, figure, (0.09, 0.12, 0.88, 0.84), (0, 1), titles)
        return titles
    # Two panels over the first objective, and the other two against each other.
    for row, pair in enumerate(((0, 1), (0, 2), (1, 2))):
        _panel(data, figure, (0.09, 0.735 - 0.325 * row, 0.88, 0.25), pair, titles)
    return titles


def _panel(
    data: FrontData,
    figure: "Figure",
    place: tuple[float, float, float, float],
    pair: tuple[int, int],
    titles: Titles,
) -> None:
    ax = figure.add_axes(place)
    x, y = data.values[:, pair[0]], data.values[:, pair[1]]
    if len(data.trade) == 2:
        # The front of two objectives is a line; of three it is a surface, and a line would say nothing.
        order = np.argsort(x, kind="stable")
        ax.plot(x[order], y[order], color=GREY, linewidth=0.8, zorder=1)
    drawn = ax.scatter(x, y, s=30.0, c=_shades(data), edgecolors=BLUE, linewidths=0.9, zorder=3)
    gid = "points" if pair == (0, 1) else f"points-{data.trade[pair[0]]}-{data.trade[pair[1]]}"
    drawn.set_gid(gid)
    titles[gid] = data.texts
    at = [data.answer[k] for k in pair]
    ax.plot([at[0]], [at[1]], marker="D", color=VERMILION, markersize=6, zorder=4)
    best = "greatest" if data.trade[0] == "separation" else "least"
    left = at[0] > 0.5 * (x.min() + x.max())
    ax.annotate(
        f"{best} {GOALS[data.trade[0]]}", (at[0], at[1]), xytext=(-12, -4) if left else (9, 9),
        textcoords="offset points", fontsize=8, ha="right" if left else "left",
    )  # fmt: skip
    ax.set_xlabel(f"{GOALS[data.trade[pair[0]]]} [{data.units[pair[0]]}]")
    ax.set_ylabel(f"{GOALS[data.trade[pair[1]]]} [{data.units[pair[1]]}]")
    ax.margins(0.05, 0.12)


def _shades(data: FrontData) -> list[tuple[float, float, float]]:
    """One blue from dark (the best in the first objective) to white; of two objectives all white."""
    from matplotlib.colors import to_rgb

    first = data.values[:, 0] * (-1.0 if data.trade[0] == "separation" else 1.0)
    span = float(np.ptp(first))
    share = (first - first.min()) / span if span > 0.0 and len(data.trade) == 3 else np.ones(len(first))
    full = np.array(to_rgb(BLUE))
    rows = full + share[:, None] * (1.0 - full)
    return [(float(r), float(g), float(b)) for r, g, b in rows]
