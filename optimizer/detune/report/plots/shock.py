"""Response in time to pulses and records: the tightest requirements, under what excites them."""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from detune.brief.forcing.base import Transient
from detune.ground.units import convert
from detune.physics.pulses import pulse_value
from detune.report.contributions import Contribution, contributions
from detune.report.forced_rows import ForcedRow, forced_rows, tightest_of_each
from detune.report.plots.style import BLACK, BLUE, GREY, VERMILION, Floats, Titles, shorten
from detune.report.words import margin_text, number, unit_of
from detune.response.direct_motion import direct_transient_values, transient_motion
from detune.response.direct_views import DirectStatic
from detune.study.run import Result

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

TITLE = "Response to shocks and records"
SHOWN = 4
COLUMNS = 2
PANEL_HEIGHT = 3.2
MOST_POINTS = 1400
# The tail after the last value above this share of the largest is not drawn.
FADED = 0.03


@dataclass(frozen=True, eq=False)
class Panel:
    """One quantity over time (T,) s: value (T,) in `unit`, its largest magnitude at `at` s.

    `room` is what the limit leaves for the shock beside all else on the side of the largest value, in `unit`, and
    `lines` are the values it reaches there, or on each side that is judged. `input_time` (P,) and `input` (P,)
    are what excites it, in `input_unit`, empty for a drop or a velocity step. `one_sided`: a resultant, never
    negative.
    """

    title: str
    source: str
    unit: str
    time: Floats
    value: Floats
    at: float
    largest: float
    room: float
    lines: tuple[float, ...]
    input_time: Floats
    input: Floats
    input_unit: str
    one_sided: bool


@dataclass(frozen=True, eq=False)
class ShockData:
    """Panels by ascending margin; `left_out` quantities are not shown; `lossy`: some part has a loss factor."""

    subject: str
    panels: tuple[Panel, ...]
    left_out: int
    lossy: bool


def data(result: Result) -> ShockData | None:
    """Return the numbers of the plot, None where no pulse or record acts or no design was assessed."""
    subject = result.subject
    if subject is None:
        return None
    brief = result.study.brief
    ranked = [
        row
        for row in tightest_of_each(forced_rows(brief, subject))
        if row.transients and row.allowable.statistic() != "rms"
    ]
    parts = [part for part in contributions(ranked[:SHOWN]) if part.shocks is not None]
    panels = tuple(_panel(part) for part in parts if np.isfinite(part.shocks or 0.0))
    if not panels:
        return None
    return ShockData(
        subject="the answer" if result.answer is not None else "the closest design",
        panels=panels,
        left_out=len(ranked) - len(panels),
        lossy=any(any(mount.loss_factor) for mount in subject.design.mounts)
        or any(connection.loss_factor for connection in brief.connections),
    )


def _panel(part: Contribution) -> Panel:
    row = part.of
    pair = ((row.allowable, row.place),)
    each = [float(direct_transient_values(row.machine, row.found, (t,), pair)[0]) for t in row.transients]
    transient = row.transients[int(np.argmax(each))]
    time, value = _response(row, transient)
    rooms = _rooms(row, max(each))
    # The largest value is the one that comes nearest to its limit, or goes farthest beyond it.
    top = int(np.argmin(np.min([room - sign * value for sign, room in rooms], axis=0)))
    room = min(rooms, key=lambda side: side[1] - side[0] * value[top])[1]
    unit = unit_of(row.row.upper if row.row.upper else row.row.value, row.row.unit)
    scale = convert(1.0, row.row.unit, unit) if unit else 1.0
    assert part.shocks is not None and row.row.upper is not None
    shown = _thinned(value)
    input_time, excites, input_unit = _input(transient)
    return Panel(
        title=(
            f"{row.row.quantity}\n{row.condition.name}, {row.place}; margin {margin_text(row.row.margin)}\n"
            f"{transient.source}: largest {number(scale * abs(float(value[top])), 3)} {unit}"
        ),
        source=transient.source,
        unit=unit,
        time=time[shown],
        value=scale * value[shown],
        at=float(time[top]),
        largest=float(scale * value[top]),
        room=scale * room,
        lines=tuple(sign * scale * own for sign, own in rooms),
        input_time=input_time,
        input=excites,
        input_unit=input_unit,
        one_sided=row.allowable.along() is None,
    )


def _rooms(row: ForcedRow, shock: float) -> list[tuple[float, float]]:
    """Return the sides that are judged, as the sign of their values, and what the limit leaves on each for the shock.

    shock: what the shock has in the judged value.
    """
    assert row.row.upper is not None
    room, along = row.row.upper - (row.row.value - shock), row.allowable.along()
    static = DirectStatic(row.machine)
    sides = row.allowable.sides(static, row.place)
    if not sides or along is None:
        return [(1.0, room)] if along is None else [(1.0, room), (-1.0, room)]
    at_rest = float(row.allowable.offset(static, row.place)[0])
    return [
        (float(np.sign(np.dot(towards, along))), room + at_rest - float(own[0])) for own, towards in sides
    ]


def _response(row: ForcedRow, transient: Transient) -> tuple[Floats, Floats]:
    """Return time (T,) and the observed quantity (T,) along its direction, or the length of its vector."""
    times, values = [], []
    start = 0.0
    along = row.allowable.along()
    for view, step in transient_motion(row.machine, row.found, transient):
        seen = np.asarray(row.allowable.observed(view, row.place))[0]
        values.append(seen @ np.asarray(along) if along is not None else np.sqrt(np.sum(seen**2, axis=-1)))
        times.append(start + step * np.arange(len(seen)))
        start = float(times[-1][-1])
    return np.concatenate(times), np.concatenate(values)


def _thinned(value: Floats) -> Floats:
    """Return which samples to draw: none of the faded tail, not more than a drawing can show, both extremes."""
    size = np.abs(value)
    last = int(np.flatnonzero(size >= FADED * size.max())[-1]) + 1 if size.max() > 0.0 else len(value)
    stride = max(1, last // MOST_POINTS)
    kept = np.unique(
        np.concatenate([np.arange(0, last, stride), [int(value[:last].argmax()), int(value[:last].argmin())]])
    )
    return np.asarray(kept)


def _input(transient: Transient) -> tuple[Floats, Floats, str]:
    unit = "m/s²" if transient.base is not None else "of load"
    size = 1.0
    if transient.base is None:
        force = float(np.linalg.norm(transient.force))
        size, unit = (force, "N") if force > 0.0 else (float(np.linalg.norm(transient.moment)), "N m")
    if transient.pulse is not None:
        end = float(transient.pulse.edge[-1])
        time = np.linspace(0.0, end * (1.0 - 1e-9), 400)
        excites = size * pulse_value(transient.pulse, time)
        return np.append(time, end), np.append(excites, 0.0), unit
    if transient.record is not None:
        kept = np.arange(0, len(transient.record), max(1, len(transient.record) // MOST_POINTS))
        return np.asarray(transient.step * kept, dtype=float), size * transient.record[kept], unit
    return np.zeros(0), np.zeros(0), ""


def caption(data: ShockData) -> str:
    """Return what the plot shows, in words."""
    text = (
        f"Responses of {data.subject} over time, each at the place with the least margin; on top what excites them. "
        "The dot is the largest value. The dashed lines are what the limit leaves for the shock when all else that "
        "acts in the condition, and what is there at rest, is taken off it."
    )
    if data.lossy:
        text += (
            " In time a loss factor stands as viscous damping: each mode is damped as its own loss factor would "
            "damp it at its natural frequency, as a loss factor itself is not causal."
        )
    return f"{text} {data.left_out} quantities with larger margins are not drawn." if data.left_out else text


def size(data: ShockData) -> tuple[float, float]:
    """Return width and height in inches."""
    return 8.6, PANEL_HEIGHT * -(-len(data.panels) // COLUMNS) + 0.1


def draw(data: ShockData, figure: "Figure") -> Titles:
    """Draw the panels."""
    width, height = size(data)
    for index, panel in enumerate(data.panels):
        row, column = divmod(index, COLUMNS)
        left = (0.68 + column * (width / COLUMNS)) / width
        wide = (width / COLUMNS - 0.92) / width
        bottom = height - (row + 1) * PANEL_HEIGHT + 0.36
        end = float(panel.time[-1])
        ax = figure.add_axes((left, bottom / height, wide, 1.38 / height))
        _draw_response(ax, panel)
        ax.set_xlim(0.0, 1e3 * end)
        if len(panel.input):
            above = figure.add_axes((left, (bottom + 1.5) / height, wide, 0.48 / height))
            _draw_input(above, panel)
            above.set_xlim(0.0, 1e3 * end)
        lines = "\n".join(shorten(line, 62) for line in panel.title.split("\n"))
        top = (bottom + (2.06 if len(panel.input) else 1.46)) / height
        figure.text(left, top, lines, fontsize=7.8, va="bottom", linespacing=1.25)
    return {}


def _draw_response(ax: "Axes", panel: Panel) -> None:
    ax.axhline(0.0, color=GREY, linewidth=0.6)
    ax.plot(1e3 * panel.time, panel.value, color=BLUE, linewidth=1.3)
    ax.plot([1e3 * panel.at], [panel.largest], marker="o", color=VERMILION, markersize=5.0)
    if np.isfinite(panel.room) and panel.room > 0.0:
        for line in panel.lines:
            ax.axhline(line, color=BLACK, linewidth=1.1, linestyle=(0, (5, 2)))
    reach = 1.12 * max(abs(panel.largest), min(max(panel.room, 0.0), 3.0 * abs(panel.largest)))
    ax.set_ylim(-0.05 * reach if panel.one_sided else -reach, reach)
    ax.set_xlabel("time [ms]", fontsize=7.5, labelpad=1.0)
    ax.set_ylabel(f"[{panel.unit or '-'}]", fontsize=8.0)
    ax.yaxis.set_label_coords(-0.135, 0.5)


def _draw_input(ax: "Axes", panel: Panel) -> None:
    ax.plot(
        np.append(1e3 * panel.input_time, 1e3 * panel.time[-1]) if panel.time[-1] > panel.input_time[-1]
        else 1e3 * panel.input_time,
        np.append(panel.input, 0.0) if panel.time[-1] > panel.input_time[-1] else panel.input,
        color=GREY, linewidth=1.2,
    )  # fmt: skip
    ax.tick_params(labelbottom=False, labelsize=7.0)
    ax.locator_params(axis="y", nbins=3)
    ax.set_ylabel(f"[{panel.input_unit}]", fontsize=7.5)
    ax.yaxis.set_label_coords(-0.135, 0.5)
