"""Response against its limit over speed: one small plot for each quantity, at its least margin."""

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from detune.brief.dwell import left_of
from detune.ground.units import convert
from detune.report.plots.style import (
    BLACK,
    BLUE,
    LIGHT,
    SKY,
    VERMILION,
    Floats,
    Titles,
    revolutions_above,
    shorten,
)
from detune.report.response_data import ResponseCurve, response_curves
from detune.report.robust import scatter_words, subject_verdict
from detune.report.scatter_band import Band, scatter_bands
from detune.report.words import margin_text, unit_of
from detune.solvers.verdict import DesignVerdict
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
    `at` Hz is where the largest value inside is, `places` how many places were judged. With a stated scatter,
    `band_low` and `band_high` (F,) are the least and greatest value at sampled points of it, and `guaranteed` what is
    proven not to be exceeded over all of it and the whole range, None where there is no such proof. `barred`: bands
    (Hz) in which the machine may not dwell.
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
    band_low: Floats | None = None
    band_high: Floats | None = None
    guaranteed: float | None = None
    barred: tuple[tuple[float, float], ...] = ()


@dataclass(frozen=True)
class ResponseData:
    """Panels by ascending margin; `left_out` is how many with larger margins are not shown.

    `scatter`: the stated scatter in words, empty without; `points`: how many points of it the bands were sampled at.
    `two_readings`: some part's damping is of unknown kind, and the worse reading is drawn at each speed.
    """

    subject: str
    panels: tuple[Panel, ...]
    left_out: int
    two_readings: bool = False
    scatter: str = ""
    points: int = 0


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
    drawn, verdict = ranked[:SHOWN], subject_verdict(result)
    bands = scatter_bands(result.study.brief, subject.design, [curve for curve, _ in drawn])
    known = [band for band in bands if band is not None]
    return ResponseData(
        subject="the answer" if result.answer is not None else "the closest design",
        panels=tuple(
            _panel(curve, places, band, _guaranteed(verdict, curve))
            for (curve, places), band in zip(drawn, bands, strict=True)
        ),
        scatter=scatter_words(result.study.brief) if known else "",
        points=max((band.points for band in known), default=0),
        left_out=max(0, len(ranked) - SHOWN),
        two_readings=any(mount.damping_unknown is not None for mount in subject.design.mounts),
    )


def _guaranteed(verdict: DesignVerdict | None, curve: ResponseCurve) -> float | None:
    """What is proven of a curve's requirement over the scatter, None where nothing is."""
    row = curve.row
    key = (row.kind, row.condition, row.place, row.quantity)
    for own in () if verdict is None else verdict.rows:
        if (own.kind, own.condition, own.place, own.quantity) == key and own.guaranteed is not None:
            return own.guaranteed if math.isfinite(own.guaranteed) else None
    return None


def _panel(curve: ResponseCurve, places: int, band: Band | None, guaranteed: float | None) -> Panel:
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
        band_low=None if band is None else band.low * scale,
        band_high=None if band is None else band.high * scale,
        guaranteed=None if guaranteed is None else shown(guaranteed),
        barred=curve.barred,
    )


def caption(data: ResponseData) -> str:
    """Return what the plot shows, in words."""
    text = (
        f"Responses of {data.subject}, each at the place with the least margin. The dashed line is the limit; the "
        "shaded band is the range of speed or frequency over which it is judged, the dot the largest value there "
        "(found over the continuous range, not on a grid). The thin line outside the band continues the same forcing "
        "to show where the resonances lie; it is not judged."
    )
    if data.scatter:
        text += (
            f" The pale ribbon along the curve is its range over the scatter ({data.scatter}), sampled at "
            f"{data.points} points of it, not proven; the dash-dotted line is what is proven not to be "
            "exceeded over all of the scatter and the whole range. Where a proof stops as soon as the limit "
            "is decided, that line lies close to the limit."
        )
    if any(panel.barred for panel in data.panels):
        text += " Hatched are the bands of speed in which the machine may not dwell; they are not judged."
    if data.two_readings:
        text += " The list leaves open what kind some damping is: at each speed the larger of both readings is drawn."
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
    if panel.band_low is not None and panel.band_high is not None:
        ax.fill_between(
            panel.speed, panel.band_low, panel.band_high, color=SKY, alpha=0.45, linewidth=0, zorder=1
        )
    if panel.guaranteed is not None and panel.high > panel.low:
        ax.hlines(
            [panel.guaranteed], panel.low, panel.high, color=BLUE, linewidth=1.2, linestyle="-.", zorder=4
        )
    ax.plot(panel.speed, panel.value, color=BLUE, linewidth=0.6, alpha=0.8, zorder=2)
    inside = (panel.speed >= panel.low) & (panel.speed <= panel.high)
    for start, end in panel.barred:
        ax.axvspan(start, end, facecolor="white", edgecolor="#BBBBBB", hatch="////", linewidth=0, zorder=0.5)
    if panel.barred:
        inside = np.zeros(len(panel.speed), dtype=bool)
        for start, end in left_of(panel.low, panel.high, panel.barred):
            inside |= (panel.speed >= start) & (panel.speed <= end)
    # A line that is not drawn in a barred band, and not across it either.
    heavy = np.where(inside, panel.value, np.nan)
    ax.plot(panel.speed, heavy, color=BLUE, linewidth=1.8, zorder=3)
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
