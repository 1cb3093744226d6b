"""The map of what is feasible in two unknowns: traced boundaries by name, every part as a dot, objective contours."""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from detune.brief.sizing import SizingUnknown
from detune.report.plots.style import BLACK, GREY, LIGHT, LINES, VERMILION, Floats, Titles, shorten
from detune.report.tables_sizing import GOALS
from detune.sizing.made_parts import logarithmic, sizing_of
from detune.sizing.trace import Boundary
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
    """Everything on the map in shown units: lines x (X,), y (Y,), least margin and objective (Y, X), boundaries.

    `boundaries` are (name, points (n, 2), binding (n,)); `held` tells the other unknowns; `exact` whether margins are
    closed forms; `left_out` what they do not hold; `always_failed` names what is missed all over the map.
    """

    labels: tuple[str, str]
    logs: tuple[bool, bool]
    x: Floats
    y: Floats
    least: Floats
    objective: Floats
    objective_name: str
    boundaries: tuple[Boundary, ...]
    pieces: tuple[tuple[Floats, Floats, Floats], ...]
    dots: tuple[Dot, ...]
    outside: int
    best: tuple[float, float]
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
        logs=(logarithmic(found.first), logarithmic(found.second)),
        x=x,
        y=y,
        least=found.traced.least,
        objective=found.objective,
        objective_name=GOALS[found.objective_name],
        boundaries=tuple(replace(line, points=line.points * scale) for line in found.traced.boundaries),
        pieces=tuple((p.stiffness * a, p.least_damping * b, p.greatest_damping * b) for p in found.pieces),
        dots=inside,
        outside=len(dots) - len(inside),
        best=(here[found.first.title] * a, here[found.second.title] * b),
        held=tuple(
            f"{u.title} {show(here[u.title], u.unit)}"
            for u in unknowns
            if u not in (found.first, found.second)
        ),
        exact=found.exact,
        left_out=found.left_out,
        always_failed=tuple(
            name
            for name, margin in zip(found.traced.names, found.traced.margins, strict=True)
            if bool((margin < 0.0).all())
        ),
    )


def _label(unknown: SizingUnknown, unit: str) -> str:
    return f"{unknown.title}, one part [{unit}]" if unknown.group else f"{unknown.title} [{unit}]"


def caption(data: MapData) -> str:
    """Return what the map shows, in words."""
    text = "White: every requirement met; shaded: at least one missed. "
    text += "Lines: where a requirement, at its worst place, equals its limit; thick where it bounds what is feasible. "
    text += "The lines are traced to their limit, not drawn between the nodes of a grid. "
    if data.pieces:
        text += "The white region is drawn from the exact curves of each branch, however narrow. "
    if data.held:
        text += f"Held: {', '.join(data.held)}. "
    text += f"Thin grey lines: {data.objective_name} of parts made to order. The diamond is the answer. "
    text += (
        f"Dots: every part of the lists where it has such a figure, dampers beside mounts included; {data.outside} lie "
        "outside the frame. A dot ignores a part's load range and what its list states besides; only an assessment "
        "judges."
    )
    if data.left_out:
        text += f" Not in full on this map: {'; '.join(data.left_out)}."
    if data.always_failed:
        text += f" Missed everywhere: {'; '.join(data.always_failed)}."
    return text


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
    if data.dots:
        drawn = ax.scatter(
            [d.x for d in data.dots], [d.y for d in data.dots], s=13, color=BLACK, linewidths=0, zorder=4
        )
        drawn.set_gid("parts")
        titles["parts"] = tuple(dot.name for dot in data.dots)
    ax.plot(*([value] for value in data.best), marker="D", color=VERMILION, markersize=6, zorder=6)
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
        for x, low, high in data.pieces:
            ax.fill_between(x, low, high, color="white", linewidth=0, zorder=0.5)
    elif bool((data.least >= 0.0).any()):
        ax.contourf(
            data.x, data.y, np.clip(data.least, -1.0, 1.0), levels=[0.0, 2.0], colors=["white"], zorder=0.5
        )


def _contours(ax: "Axes", data: MapData) -> None:
    low, high = float(data.objective.min()), float(data.objective.max())
    if not np.isfinite([low, high]).all() or high - low <= 1e-9 * max(abs(high), 1e-300):
        return
    levels = (
        np.geomspace(low, high, 9)[1:-1]
        if low > 0.0 and high > 10.0 * low
        else np.linspace(low, high, 9)[1:-1]
    )
    lines = ax.contour(
        data.x, data.y, data.objective, levels=levels, colors=[GREY], linewidths=0.5, zorder=1.5
    )
    ax.clabel(lines, fmt="%.4g", fontsize=6.5)


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
    handles.append(
        Line2D([], [], color=VERMILION, marker="D", markersize=6, linestyle="none", label="the answer")
    )
    handles.append(
        Line2D([], [], color=BLACK, marker="o", markersize=4, linestyle="none", label="a part of the lists")
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
