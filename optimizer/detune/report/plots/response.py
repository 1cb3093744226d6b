"""Response against its limit over speed: one small plot for each quantity, at its least margin."""

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from detune.ground.units import convert
from detune.report.plots.style import (
    BLACK,
    BLUE,
    LIGHT,
    VERMILION,
    Floats,
    Titles,
    revolutions_above,
    shorten,
)
from detune.report.response_data import ResponseCurve, response_curves
from detune.report.words import margin_text, unit_of
from detune.study.run import Result

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

TITLE = "Responses against limits"
SHOWN = 12
COLUMNS = 2
PANEL_HEIGHT = 2.35


@dataclass(frozen=True)
class Panel:
    """One quantity in one condition at the place with the least margin.

    `speed` (F,) in Hz; `value` (F,), `limit` and `peak` in `unit`; judged from `low` to `high` Hz;
    `at` Hz is where the largest value inside is, `places` how many places were judged.
    """

    title: str
    source: str
    is_shaft: bool
    unit: str
    speed: Floats
    value: Floats
    limit: float
    low: float
    high: float
    at: float
    peak: float
    margin: float
    places: int
    passage: bool


@dataclass(frozen=True)
class ResponseData:
    """Panels by ascending margin; `left_out` is how many with larger margins are not shown.

    `two_readings`: some part's damping is of unknown kind, and the worse reading is drawn at each speed.
    """

    subject: str
    panels: tuple[Panel, ...]
    left_out: int
    two_readings: bool = False


def data(result: Result) -> ResponseData | None:
    """Return the numbers of the plot, None where nothing vibrates or no design was assessed."""
    subject = result.subject
    if subject is None:
        return None
    groups: dict[tuple[str, ...], list[ResponseCurve]] = {}
    for curve in response_curves(result.study.brief, subject):
        key = (
            curve.row.kind,
            curve.row.quantity,
            curve.row.condition,
            curve.source,
            f"{curve.low} {curve.high}",
        )
        groups.setdefault(key, []).append(curve)
    tightest = [
        (min(curves, key=lambda c: c.row.margin), len({c.row.place for c in curves}))
        for curves in groups.values()
    ]
    ranked = sorted(tightest, key=lambda item: item[0].row.margin)
    if not ranked:
        return None
    return ResponseData(
        subject="the answer" if result.answer is not None else "the closest design",
        panels=tuple(_panel(curve, places) for curve, places in ranked[:SHOWN]),
        left_out=max(0, len(ranked) - SHOWN),
        two_readings=any(mount.damping_unknown is not None for mount in subject.design.mounts),
    )


def _panel(curve: ResponseCurve, places: int) -> Panel:
    row = curve.row
    unit = unit_of(curve.limit, row.unit)

    def shown(value: float) -> float:
        return convert(value, row.unit, unit) if unit else value

    scale = shown(1.0)
    inside = np.flatnonzero(curve.inside)
    top = inside[curve.value[inside].argmax()]
    # The assessor's own place of the worst, where it belongs to this source.
    at = row.frequency if row.frequency is not None and curve.low <= row.frequency <= curve.high else None
    is_own = at is not None and row.value >= curve.value[top] * (1.0 - 1e-9)
    return Panel(
        title=f"{row.quantity}\n{row.condition}, {row.place}",
        source=curve.source,
        is_shaft=curve.is_shaft,
        unit=unit,
        speed=curve.speed,
        value=curve.value * scale,
        limit=shown(curve.limit),
        low=curve.low,
        high=curve.high,
        at=float(at if is_own and at is not None else curve.speed[top]),
        peak=shown(row.value if is_own or curve.passage else float(curve.value[top])),
        margin=row.margin,
        places=places,
        passage=curve.passage,
    )


def caption(data: ResponseData) -> str:
    """Return what the plot shows, in words."""
    text = (
        f"Responses of {data.subject}, each at the place with the least margin. The dashed line is the limit; the "
        "shaded band is the range of speed or frequency over which it is judged, the dot the largest value there "
        "(found over the continuous range, not on a grid). The thin line outside the band continues the same forcing "
        "to show where the resonances lie; it is not judged."
    )
    if data.two_readings:
        text += (
            " The list leaves open what kind some damping is: at each speed the larger of both readings is drawn."
        )
    return (
        f"{text} {data.left_out} quantities with larger margins are in responses.csv."
        if data.left_out
        else text
    )


def size(data: ResponseData) -> tuple[float, float]:
    """Return width and height in inches."""
    return 8.6, PANEL_HEIGHT * -(-len(data.panels) // COLUMNS) + 0.25


def draw(data: ResponseData, figure: "Figure") -> Titles:
    """Draw the panels."""
    width, height = size(data)
    for index, panel in enumerate(data.panels):
        row, column = divmod(index, COLUMNS)
        left = (0.62 + column * (width / COLUMNS)) / width
        bottom = (height - (row + 1) * PANEL_HEIGHT + 0.33) / height
        ax = figure.add_axes((left, bottom, (width / COLUMNS - 0.85) / width, (PANEL_HEIGHT - 1.08) / height))
        _draw_panel(ax, panel)
    return {}


def _draw_panel(ax: "Axes", panel: Panel) -> None:
    if panel.high > panel.low:
        ax.axvspan(panel.low, panel.high, color=LIGHT, linewidth=0, zorder=0)
    else:
        ax.axvline(panel.low, color="#BBBBBB", linewidth=3.0, zorder=0)
    ax.plot(panel.speed, panel.value, color=BLUE, linewidth=0.6, alpha=0.8, zorder=2)
    inside = (panel.speed >= panel.low) & (panel.speed <= panel.high)
    ax.plot(panel.speed[inside], panel.value[inside], color=BLUE, linewidth=1.8, zorder=3)
    ax.axhline(panel.limit, color=BLACK, linewidth=1.1, linestyle=(0, (5, 2)), zorder=4)
    if panel.passage:
        ax.hlines(
            [panel.peak], panel.low, panel.high, color=VERMILION, linewidth=1.6, linestyle=":", zorder=5
        )
    else:
        ax.plot([panel.at], [panel.peak], marker="o", color=VERMILION, markersize=5.5, zorder=5)
    ax.set_yscale("log")
    ax.set_xscale("linear")
    ax.set_xlim(panel.speed[0], panel.speed[-1])
    positive = panel.value[panel.value > 0.0]
    floor = 0.3 * min(panel.limit, panel.peak)
    if len(positive):
        floor = max(min(floor, float(positive.min())), 1e-3 * panel.limit, 0.02 * panel.peak)
    ax.set_ylim(
        0.7 * floor, 2.2 * max(panel.limit, panel.peak, min(float(panel.value.max()), 30.0 * panel.limit))
    )
    _plain_ticks(ax)
    ax.set_ylabel(f"[{panel.unit or '-'}]")
    ax.yaxis.set_label_coords(-0.105, 0.5)
    if panel.is_shaft:
        revolutions_above(ax, label=False)
    axis = f"{panel.source}: speed [Hz], on top [rev/min]" if panel.is_shaft else f"{panel.source} [Hz]"
    ax.set_xlabel(shorten(axis, 62), fontsize=7.5)
    ax.xaxis.set_label_coords(0.5, -0.18)
    first, second = panel.title.split("\n")
    where = f" (worst of {panel.places} places)" if panel.places > 1 else ""
    title = f"{shorten(first, 58)}\n{shorten(second + where, 44)}; margin {margin_text(panel.margin)}"
    # Text of its own instead of an axes title, whose place is searched for anew at every drawing.
    ax.text(0.0, 1.17, title, transform=ax.transAxes, fontsize=8.0, va="bottom", linespacing=1.25)


def _plain_ticks(ax: "Axes") -> None:
    """A few numbers as people write them instead of powers of ten with many small ticks."""
    low, high = ax.get_ylim()
    decades = range(math.floor(math.log10(low)), math.ceil(math.log10(high)) + 1)
    steps = (1.0, 2.0, 5.0) if high / low < 60.0 else (1.0,)
    values = [step * 10.0**decade for decade in decades for step in steps]
    shown = [value for value in values if low <= value <= high]
    ax.set_yticks(shown, [f"{value:g}" for value in shown])
    ax.set_yticks([], minor=True)
