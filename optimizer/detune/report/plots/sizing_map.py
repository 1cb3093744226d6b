"""The map of what is feasible in two unknowns: traced boundaries by name, every part as a dot, objective contours."""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from detune.report.plots.style import BLACK, GREY, LIGHT, LINES, VERMILION, Floats, Titles, shorten
from detune.report.tables_sizing import GOALS
from detune.sizing.made_parts import sizing_of
from detune.sizing.trace import Boundary
from detune.solvers.map_axes import MapAxis
from detune.solvers.map_region import Region
from detune.study.size import SizingResult

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

TITLE = "Map of what is feasible"
SHOWN = {
    "stiffness": ("N/mm", 1e-3),
    "damping": ("N s/m", 1.0),
    "mass": ("kg", 1.0),
    "frequency": ("Hz", 1.0),
    "length": ("mm", 1e3),
    "ratio": ("-", 1.0),
}
NAMED = 8


@dataclass(frozen=True)
class Dot:
    """A part on the map, in shown units."""

    name: str
    x: float
    y: float


@dataclass(frozen=True)
class MapData:
    """Everything on the map in shown units: lines x (X,), y (Y,), objective (Y, X), region and boundaries.

    `boundaries` are (name, points (n, 2), binding (n,)); `pieces` the exact outlines of the branches; `best` the
    answer, None where there is none; `held` tells the other unknowns; `left_out` what the closed forms do not
    hold; `always_failed` names what is missed all over the map; `outside` and `without` count parts that are no dot.
    """

    labels: tuple[str, str]
    logs: tuple[bool, bool]
    x: Floats
    y: Floats
    region: Region
    objective: Floats
    objective_name: str
    boundaries: tuple[Boundary, ...]
    pieces: tuple[Floats, ...]
    dots: tuple[Dot, ...]
    outside: int
    without: int
    best: tuple[float, float] | None
    held: tuple[str, ...]
    exact: bool
    left_out: tuple[str, ...]
    always_failed: tuple[str, ...]


def data(result: SizingResult) -> MapData | None:
    """Return the numbers of the map, None where the study asks for none."""
    found = result.map
    if found is None:
        return None
    from dataclasses import replace

    from detune.ground.units import show

    (unit_x, a), (unit_y, b) = SHOWN[found.first.unit], SHOWN[found.second.unit]
    unknowns = sizing_of(result.study.brief).unknown
    here = {unknown.title: value for unknown, value in zip(unknowns, found.values.tolist(), strict=True)}
    x, y = found.traced.x * a, found.traced.y * b
    scale = np.array([a, b])
    dots = tuple(Dot(dot.name, dot.x * a, dot.y * b) for dot in found.dots)
    inside = tuple(dot for dot in dots if x[0] <= dot.x <= x[-1] and y[0] <= dot.y <= y[-1])
    return MapData(
        labels=(_label(found.first, unit_x), _label(found.second, unit_y)),
        logs=(found.first.logarithmic, found.second.logarithmic),
        x=x,
        y=y,
        region=replace(
            found.region, x=found.region.x * a, y=found.region.y * b, specks=found.region.specks * scale
        ),
        objective=found.objective,
        objective_name=GOALS[found.objective_name],
        boundaries=tuple(replace(line, points=line.points * scale) for line in found.traced.boundaries),
        pieces=tuple(piece * scale for piece in found.pieces),
        dots=inside,
        outside=len(dots) - len(inside),
        without=found.without,
        best=(found.place[0] * a, found.place[1] * b) if found.answer else None,
        held=tuple(
            f"{u.title} {show(here[u.title], u.unit)}"
            for number, u in enumerate(unknowns)
            if number not in (found.first.column, found.second.column)
        ),
        exact=found.exact,
        left_out=found.left_out,
        always_failed=tuple(
            name
            for name, margin in zip(found.traced.names, found.traced.margins, strict=True)
            if bool((margin < 0.0).all())
        ),
    )


def _label(axis: MapAxis, unit: str) -> str:
    own = "" if axis.derived or axis.group is None or axis.kind.startswith("absorber") else ", one part"
    return f"{axis.title}{own} [{unit}]"


def caption(data: MapData) -> str:
    """Return what the map shows, in words."""
    text = "White: every requirement met; shaded: at least one missed. "
    text += "Lines: where a requirement, at its worst place, equals its limit; thick where it bounds what is feasible. "
    text += "The lines are traced to their limit, not drawn between the nodes of a grid. "
    if len(data.region.specks):
        text += "A ring marks what is feasible and too small to be seen. "
    if data.pieces:
        text += "The white region is drawn from the exact curves of each branch, however narrow. "
    if data.held:
        text += f"Held: {', '.join(data.held)}. "
    text += f"Thin grey lines: {data.objective_name} of parts made to order. "
    text += (
        "The diamond is the answer. " if data.best else "No design meets the brief, so no answer is marked. "
    )
    text += _parts_text(data)
    if data.left_out:
        text += f" Not in full on this map: {'; '.join(data.left_out)}."
    if data.always_failed:
        text += f" Missed everywhere: {'; '.join(data.always_failed)}."
    return text


def _parts_text(data: MapData) -> str:
    if not data.dots and not data.outside and not data.without:
        return "No list has parts that could stand on this map."
    text = "Dots: every part that the choices of the study admit, dampers beside mounts included"
    if data.outside:
        text += f"; {data.outside} of them lie outside the frame"
    if data.without:
        text += f"; {data.without} have no such figure in their list and are left out"
    return f"{text}. A dot ignores a part's load range and what its list states besides; only an assessment judges."


def size(data: MapData) -> tuple[float, float]:
    """Return width and height in inches."""
    names = len(dict.fromkeys(line.name for line in data.boundaries))
    return 8.6, 5.3 + 0.165 * (min(names, NAMED) + 3)


def draw(data: MapData, figure: "Figure") -> Titles:
    """Draw the map and return the hover texts of its dots."""
    width, height = size(data)
    ax = figure.add_axes((0.75 / width, (height - 4.9) / height, (width - 1.0) / width, 4.8 / height))
    ax.set_facecolor("#EBEBEB")
    _feasible(ax, data)
    _contours(ax, data)
    handles = _lines(ax, data)
    titles: Titles = {}
    if len(data.region.specks):
        for x, y in data.region.specks:
            ax.plot(
                [x], [y], marker="o", markersize=13, markerfacecolor="none", markeredgecolor=BLACK, zorder=5
            )
    if data.dots:
        drawn = ax.scatter(
            [d.x for d in data.dots], [d.y for d in data.dots], s=13, color=BLACK, linewidths=0, zorder=4
        )
        drawn.set_gid("parts")
        titles["parts"] = tuple(dot.name for dot in data.dots)
    if data.best is not None:
        ax.plot(
            *([value] for value in data.best),
            marker="D",
            color=VERMILION,
            markersize=6,
            zorder=6,
            clip_on=False,
        )
    for axis, log in zip(("x", "y"), data.logs, strict=True):
        if log:
            getattr(ax, f"set_{axis}scale")("log")
    ax.set_xlim(data.x[0], data.x[-1])
    ax.set_ylim(data.y[0], data.y[-1])
    _plain(ax, data)
    ax.set_xlabel(data.labels[0])
    ax.set_ylabel(data.labels[1])
    figure.legend(
        handles=handles, loc="lower left", bbox_to_anchor=(0.5 / width, 0.0), ncols=1, fontsize=7.5, frameon=False,
        handlelength=4.0, labelspacing=0.25,
    )  # fmt: skip
    return titles


def _feasible(ax: "Axes", data: MapData) -> None:
    if data.pieces:
        for outline in data.pieces:
            ax.fill(outline[:, 0], outline[:, 1], color="white", linewidth=0.3, zorder=0.5)
    elif bool((data.region.least >= 0.0).any()):
        least = np.clip(data.region.least, -1.0, 1.0)
        ax.contourf(data.region.x, data.region.y, least, levels=[0.0, 2.0], colors=["white"], zorder=0.5)


def _contours(ax: "Axes", data: MapData) -> None:
    low, high = float(data.objective.min()), float(data.objective.max())
    if not np.isfinite([low, high]).all() or high - low <= 1e-9 * max(abs(high), 1e-300):
        return
    levels = (
        np.geomspace(low, high, 9)[1:-1]
        if low > 0.0 and high > 10.0 * low
        else np.linspace(low, high, 9)[1:-1]
    )
    x, y, objective = data.x, data.y, data.objective
    if not data.exact:
        x, y, objective = _smooth(data)
    lines = ax.contour(x, y, objective, levels=levels, colors=[GREY], linewidths=0.5, zorder=1.5)
    ax.clabel(lines, fmt="%.4g", fontsize=6.5)


def _smooth(data: MapData) -> tuple[Floats, Floats, Floats]:
    """The objective on finer lines, by a cubic spline through the designs that were judged."""
    from scipy.interpolate import RectBivariateSpline

    along = [np.log(line) if log else line for line, log in zip((data.x, data.y), data.logs, strict=True)]
    finer = [np.interp(np.linspace(0, len(a) - 1, 6 * len(a)), np.arange(len(a)), a) for a in along]
    spline = RectBivariateSpline(along[1], along[0], data.objective)
    x, y = (np.exp(line) if log else line for line, log in zip(finer, data.logs, strict=True))
    return x, y, np.asarray(spline(finer[1], finer[0]))


def _lines(ax: "Axes", data: MapData) -> "list[Artist]":
    from matplotlib.lines import Line2D

    handles: list[Artist] = []
    names = list(dict.fromkeys(line.name for line in data.boundaries))
    names.sort(key=lambda name: -sum(int(b.binding.sum()) for b in data.boundaries if b.name == name))
    for index, name in enumerate(names):
        colour, style = LINES[index % len(LINES)]
        colour = colour if index < NAMED else LIGHT
        for line in data.boundaries:
            if line.name != name:
                continue
            ax.plot(
                line.points[:, 0], line.points[:, 1], color=colour, linestyle=style, linewidth=0.9, zorder=2.5
            )
            kept = np.where(line.binding[:, None], line.points, np.nan)
            ax.plot(kept[:, 0], kept[:, 1], color=colour, linewidth=2.2, zorder=3)
        if index < NAMED:
            handles.append(
                Line2D([], [], color=colour, linestyle=style, linewidth=1.6, label=shorten(name, 110))
            )
    if data.best is not None:
        handles.append(
            Line2D([], [], color=VERMILION, marker="D", markersize=6, linestyle="none", label="the answer")
        )
    if len(data.region.specks):
        label = "feasible, too small to be seen"
        handles.append(
            Line2D(
                [], [], marker="o", markersize=8, linestyle="none", markerfacecolor="none", markeredgecolor=BLACK,
                label=label,
            )
        )  # fmt: skip
    if data.dots:
        handles.append(
            Line2D(
                [], [], color=BLACK, marker="o", markersize=4, linestyle="none", label="a part of the lists"
            )
        )
    handles.append(Line2D([], [], color=GREY, linewidth=0.5, label=data.objective_name))
    return handles


def _plain(ax: "Axes", data: MapData) -> None:
    for log, limits, setter in (
        (data.logs[0], ax.get_xlim(), ax.set_xticks),
        (data.logs[1], ax.get_ylim(), ax.set_yticks),
    ):
        if not log:
            continue
        low, high = limits
        decades = range(int(np.floor(np.log10(low))), int(np.ceil(np.log10(high))) + 1)
        values = [step * 10.0**decade for decade in decades for step in (1.0, 2.0, 5.0)]
        shown = [value for value in values if low <= value <= high]
        setter(shown, [f"{value:g}" for value in shown])
        setter([], minor=True)
