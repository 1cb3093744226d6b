"""The front: the traded objectives of every design that meets the brief, those on the front joined."""

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from detune.report.plots.style import BLACK, BLUE, GREY, VERMILION, Floats, Titles
from detune.report.words import OBJECTIVE_WORDS, design_text, objective_value_text
from detune.response.assessment import Assessment
from detune.response.design import Design
from detune.study.front import objective_of
from detune.study.run import Result

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

TITLE = "Front"
# Beyond this many dots a page becomes slow; the dots are then drawn as a picture without hover text.
TITLED = 4000
NUMBERED = 24
# Beyond this share of the width a label stands to the left of its mark.
RIGHT = 0.8
IN_PER_CENT = ("separation", "least-margin")
UNITS = {
    "cost": "currency of the lists",
    "separation": "%",
    "least-margin": "%",
    "added-mass": "kg",
    "part-numbers": "-",
}


@dataclass(frozen=True)
class Marked:
    """A design with a name of its own: its objectives (k,), label, and whether it meets the brief."""

    label: str
    text: str
    values: tuple[float, ...]
    meets: bool


@dataclass(frozen=True)
class FrontData:
    """Objectives in shown units (separation and margin in per cent).

    `values` (D, k) of every design that meets the brief with its `texts`; `front` (F, k) of the points of
    the front in their order with `front_texts`; `marked` are the answer, the named designs, and where
    nothing meets the brief the closest one. A value that is no finite number is nan.
    """

    trade: tuple[str, ...]
    values: Floats
    texts: tuple[str, ...]
    front: Floats
    front_texts: tuple[str, ...]
    marked: tuple[Marked, ...]

    @property
    def panels(self) -> tuple[tuple[int, int], ...]:
        """Columns drawn against each other: the first objective against each other one."""
        return tuple((0, other) for other in range(1, len(self.trade)))


def shown(value: float, name: str) -> float:
    """Return an objective in the unit of its axis, nan where there is none."""
    if not math.isfinite(value):
        return math.nan
    return 100.0 * value if name in IN_PER_CENT else value


def data(result: Result) -> FrontData | None:
    """Return the numbers of the plot, None where there is no design at all to show."""
    front, trade = result.front, result.front.trade
    marked = _marked(result)
    if front.designs.count == 0 and not marked:
        return None
    values = np.array(
        [
            [shown(float(front.objectives[name][i]), name) for name in trade]
            for i in range(front.designs.count)
        ]
    ).reshape(front.designs.count, len(trade))
    points = np.array([[shown(objective_of(p, name), name) for name in trade] for p in front.points])
    texts: tuple[str, ...] = ()
    if front.designs.count <= TITLED:
        texts = tuple(
            _text(
                result.problem.design(front.designs, i),
                [objective_value_text(float(front.objectives[name][i]), name) for name in trade],
                trade,
            )
            for i in range(front.designs.count)
        )
    return FrontData(
        trade=trade,
        values=values,
        texts=texts,
        front=points.reshape(len(front.points), len(trade)),
        front_texts=tuple(f"{i + 1}: {_of(p, trade)}" for i, p in enumerate(front.points)),
        marked=marked,
    )


def _marked(result: Result) -> tuple[Marked, ...]:
    named: list[tuple[str, Assessment]] = []
    if result.robust_answer is not None:
        named.append(("answer", result.robust_answer))
    if result.answer is not None and result.answer != result.robust_answer:
        # Over a stated scatter only a proven design is the answer.
        named.append(("cheapest at listed values" if result.guaranteed else "answer", result.answer))
    count = len(result.compared)
    named += [(f"named {i + 1}" if count > 1 else "named", a) for i, a in enumerate(result.compared)]
    if result.answer is None and result.closest is not None:
        named.append(("closest", result.closest))
    trade = result.front.trade
    return tuple(
        Marked(label, _of(a, trade), tuple(shown(objective_of(a, name), name) for name in trade), a.meets)
        for label, a in named
    )


def _of(assessment: Assessment, trade: tuple[str, ...]) -> str:
    values = [objective_value_text(objective_of(assessment, name), name) for name in trade]
    return _text(assessment.design, values, trade)


def _text(design: Design, values: list[str], trade: tuple[str, ...]) -> str:
    listed = ", ".join(f"{OBJECTIVE_WORDS[name]} {value}" for name, value in zip(trade, values, strict=True))
    return f"{design_text(design)}; {listed}"


def caption(data: FrontData) -> str:
    """Return what the plot shows, in words."""
    parts = []
    if len(data.values):
        kind = "Joined dots" if len(data.panels) == 1 else "Large dots"
        parts.append(
            f"Small dots: the {len(data.values)} designs that meet every requirement in the solver's evaluation. "
            f"{kind}, numbered as in the table: the {len(data.front)} on the front, each confirmed by the assessor."
        )
    if any(not mark.meets for mark in data.marked):
        parts.append("Crosses: designs that do not meet the brief.")
    if data.texts:
        parts.append("Point at a dot for its parts.")
    elif len(data.values):
        parts.append("There are too many dots for hover texts; designs.csv lists every one.")
    for column, name in enumerate(data.trade):
        if len(data.values) and np.isnan(data.values[:, column]).all():
            parts.append(f"No design has a {OBJECTIVE_WORDS[name]} that can be drawn (governed by response).")
    return " ".join(parts)


def size(data: FrontData) -> tuple[float, float]:
    """Return width and height in inches."""
    return 8.6, 4.4 * len(data.panels) if len(data.panels) > 1 else 4.8


def draw(data: FrontData, figure: "Figure") -> Titles:
    """Draw the front and return the hover texts."""
    titles: Titles = {}
    axes = figure.subplots(len(data.panels), 1, squeeze=False)[:, 0]
    height = size(data)[1]
    figure.subplots_adjust(left=0.09, right=0.97, top=1.0 - 0.25 / height, bottom=0.55 / height, hspace=0.25)
    for panel, (ax, (first, second)) in enumerate(zip(axes, data.panels, strict=True)):
        titles |= _panel(data, ax, panel, first, second)
    return titles


def _panel(data: FrontData, ax: "Axes", panel: int, first: int, second: int) -> Titles:
    titles: Titles = {}
    columns = [first, second]
    drawn = np.flatnonzero(np.isfinite(data.values[:, columns]).all(axis=1))
    if len(drawn):
        dots = ax.scatter(
            data.values[drawn, first], data.values[drawn, second], s=9, color=GREY, linewidths=0, zorder=2
        )
        dots.set_gid(f"designs-{panel}")
        if data.texts:
            titles[f"designs-{panel}"] = tuple(data.texts[i] for i in drawn)
        else:
            dots.set_rasterized(True)
    kept = np.flatnonzero(np.isfinite(data.front[:, columns]).all(axis=1))
    if len(kept):
        points = data.front[kept][:, columns]
        if len(data.panels) == 1:
            ax.plot(points[:, 0], points[:, 1], color=BLUE, linewidth=1.0, zorder=3)
        large = ax.scatter(
            points[:, 0], points[:, 1], s=42, color=BLUE, edgecolors="white", linewidths=0.6, zorder=4
        )
        large.set_gid(f"front-{panel}")
        titles[f"front-{panel}"] = tuple(data.front_texts[i] for i in kept)
        _numbers(ax, data, kept, points)
    ax.margins(x=0.09, y=0.14)
    titles |= _marks(data, ax, panel, first, second)
    if len(drawn) == 0 and len(kept) == 0:
        ax.text(0.5, 0.92, "no design that meets the brief", transform=ax.transAxes, ha="center", va="top")
    for name, setter in ((data.trade[first], ax.set_xlabel), (data.trade[second], ax.set_ylabel)):
        setter(f"{OBJECTIVE_WORDS[name]} [{UNITS[name]}]")
    ax.grid(color="#DDDDDD", linewidth=0.5)
    ax.set_axisbelow(True)
    return titles


def _numbers(ax: "Axes", data: FrontData, kept: NDArray[np.intp], points: Floats) -> None:
    numbers = kept + 1
    if len(numbers) > NUMBERED:
        return
    for number, (x, y) in zip(numbers, points, strict=True):
        ax.annotate(
            str(number),
            (x, y),
            xytext=(-5, 5),
            textcoords="offset points",
            ha="right",
            fontsize=8,
            color=BLUE,
        )


def _marks(data: FrontData, ax: "Axes", panel: int, first: int, second: int) -> Titles:
    # Labels need the final limits, so every mark is on the axes before the first label.
    ax.update_datalim(
        [m.values[first : second + 1 : second - first] for m in data.marked if _finite(m, first, second)]
    )
    ax.autoscale_view()
    titles: Titles = {}
    for index, mark in enumerate(data.marked):
        x, y = mark.values[first], mark.values[second]
        if not _finite(mark, first, second):
            continue
        if mark.label == "answer":
            dot = ax.scatter([x], [y], s=150, facecolors="none", edgecolors=BLACK, linewidths=1.4, zorder=6)
        elif mark.meets:
            dot = ax.scatter(
                [x], [y], s=60, marker="s", facecolors="none", edgecolors=VERMILION, linewidths=1.5, zorder=6
            )
        else:
            dot = ax.scatter([x], [y], s=60, marker="X", color=VERMILION, linewidths=0, zorder=6)
        gid = f"marked-{panel}-{index}"
        dot.set_gid(gid)
        titles[gid] = (f"{mark.label}: {mark.text}",)
        label = mark.label if mark.meets else f"{mark.label} (not met)"
        at_right = ax.transAxes.inverted().transform(ax.transData.transform((x, y)))[0] > RIGHT
        ax.annotate(
            label,
            (x, y),
            xytext=(-9 if at_right else 9, -12),
            textcoords="offset points",
            ha="right" if at_right else "left",
            fontsize=8.5,
            fontweight="bold" if mark.label == "answer" else "normal",
            zorder=7,
        )
    return titles


def _finite(mark: Marked, first: int, second: int) -> bool:
    return math.isfinite(mark.values[first]) and math.isfinite(mark.values[second])
