"""Response spectral density under random forcing, and the density of what excites it."""

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from detune.brief.forcing.base import Noise
from detune.ground.units import convert, show
from detune.physics.spectra import density_at, root_mean_square
from detune.report.contributions import Contribution, contributions
from detune.report.forced_rows import ForcedRow, forced_rows, tightest_of_each
from detune.report.plots.style import BLACK, BLUE, GREY, LINES, Floats, Titles, shorten
from detune.report.words import margin_text, number, unit_of
from detune.response.direct_random import unit_tone
from detune.response.direct_views import DirectTone
from detune.study.run import Result

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

TITLE = "Response spectral density"
SHOWN = 5
COLUMNS = 2
PANEL_HEIGHT = 2.55
TWO_PI = 2.0 * np.pi
BACKGROUND = 220
# Distances from a pole in its half-widths, so that a drawn resonance keeps its height.
AROUND_POLE = np.array([-8.0, -4.0, -2.0, -1.0, -0.5, 0.0, 0.5, 1.0, 2.0, 4.0, 8.0])
DECADES = 5.0
RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


@dataclass(frozen=True, eq=False)
class Curve:
    """A density (F,) in the square of the panel's unit per Hz over frequency (F,) in Hz, and its rms."""

    name: str
    frequency: Floats
    density: Floats
    rms: float


@dataclass(frozen=True, eq=False)
class Panel:
    """One quantity, or what excites a condition; `modes` (Hz) are the natural frequencies inside."""

    title: str
    unit: str
    curves: tuple[Curve, ...]
    modes: tuple[float, ...]
    is_input: bool


@dataclass(frozen=True, eq=False)
class DensityData:
    """Inputs of each condition shown, then responses by ascending margin; `left_out` quantities are not shown."""

    subject: str
    panels: tuple[Panel, ...]
    left_out: int


def data(result: Result) -> DensityData | None:
    """Return the numbers of the plot, None where no noise acts or no design was assessed."""
    subject = result.subject
    if subject is None:
        return None
    brief = result.study.brief
    ranked = [row for row in tightest_of_each(forced_rows(brief, subject)) if row.noises]
    shown = ranked[:SHOWN]
    if not shown:
        return None
    inputs = {row.condition.name: row for row in shown}
    return DensityData(
        subject="the answer" if result.answer is not None else "the closest design",
        panels=(
            *(panel for row in inputs.values() for panel in _inputs(row)),
            *(_response(part) for part in contributions(shown)),
        ),
        left_out=len(ranked) - len(shown),
    )


def _inputs(row: ForcedRow) -> list[Panel]:
    """Return one panel for the accelerations of the floor and one for the forces, where there are any."""
    panels = []
    for what, unit, moves in (("floor acceleration", "m/s²", True), ("force", "N", False)):
        noises = [noise for noise in row.noises if (noise.base is not None) == moves]
        if not noises:
            continue
        curves = tuple(
            Curve(
                noise.source,
                noise.spectrum.frequency,
                noise.spectrum.density,
                root_mean_square(noise.spectrum),
            )
            for noise in noises
        )
        panels.append(Panel(f"input: {what}\n{row.condition.name}", unit, curves, _modes(row), True))
    return panels


def _response(part: Contribution) -> Panel:
    row = part.of
    unit = unit_of(row.row.upper if row.row.upper else row.row.value, row.row.unit)
    scale = convert(1.0, row.row.unit, unit) if unit else 1.0
    frequency = _frequencies(row)
    density = sum((_density(row, noise, frequency) for noise in row.noises), np.zeros_like(frequency))
    assert part.random_rms is not None and part.extreme is not None and part.duration is not None
    extreme = f"expected extreme {number(scale * part.extreme, 3)} in {show(part.duration, 'time')}"
    title = (
        f"{row.row.quantity}\n{row.condition.name}, {row.place}; margin {margin_text(row.row.margin)}\n"
        f"rms {number(scale * part.random_rms, 3)} {unit}, {extreme}"
    )
    curve = Curve("response", frequency, scale**2 * density, scale * part.random_rms)
    return Panel(title, unit, (curve,), _modes(row), False)


def _frequencies(row: ForcedRow) -> Floats:
    low = min(float(noise.spectrum.frequency[0]) for noise in row.noises)
    high = max(float(noise.spectrum.frequency[-1]) for noise in row.noises)
    looks = [np.geomspace(low, high, BACKGROUND)]
    looks += [noise.spectrum.frequency for noise in row.noises]
    for pole in row.found.poles:
        looks.append((pole.imag + max(-pole.real, 1e-6 * abs(pole)) * AROUND_POLE) / TWO_PI)
    frequency = np.unique(np.concatenate(looks))
    return frequency[(frequency >= low) & (frequency <= high)]


def _density(row: ForcedRow, noise: Noise, frequency: Floats) -> Floats:
    """Return |H|^2 S (F,), of a resultant the sum over its axes."""
    view = DirectTone(row.machine, (unit_tone(noise),), TWO_PI * frequency[None])
    observed = row.allowable.weighted(row.allowable.observed(view, row.place), frequency[None])[0]
    along = row.allowable.along()
    axes = (observed @ np.asarray(along))[:, None] if along is not None else observed
    density: Floats = np.sum(np.abs(axes) ** 2, axis=-1) * density_at(noise.spectrum, frequency)
    return density


def _modes(row: ForcedRow) -> tuple[float, ...]:
    low = min(float(noise.spectrum.frequency[0]) for noise in row.noises)
    high = max(float(noise.spectrum.frequency[-1]) for noise in row.noises)
    return tuple(float(f) for f in row.found.frequency if low <= f <= high)


def caption(data: DensityData) -> str:
    """Return what the plot shows, in words."""
    text = (
        f"One-sided spectral densities of {data.subject}, each quantity at the place with its least margin: the random "
        "part alone, all sources of the condition together. The area under a curve is its mean square. Ticks below the "
        "curves mark the natural frequencies. Inputs as stated, or as measured before the machine stood there."
    )
    more = f" {data.left_out} quantities with larger margins are not drawn." if data.left_out else ""
    return text + more


def size(data: DensityData) -> tuple[float, float]:
    """Return width and height in inches."""
    return 8.6, PANEL_HEIGHT * -(-len(data.panels) // COLUMNS) + 0.1


def draw(data: DensityData, figure: "Figure") -> Titles:
    """Draw the panels."""
    width, height = size(data)
    for index, panel in enumerate(data.panels):
        row, column = divmod(index, COLUMNS)
        left = (0.68 + column * (width / COLUMNS)) / width
        bottom = (height - (row + 1) * PANEL_HEIGHT + 0.33) / height
        ax = figure.add_axes((left, bottom, (width / COLUMNS - 0.92) / width, (PANEL_HEIGHT - 1.05) / height))
        _draw_panel(ax, panel)
    return {}


def _draw_panel(ax: "Axes", panel: Panel) -> None:
    for index, curve in enumerate(panel.curves):
        color, style = (BLUE, "-") if not panel.is_input else LINES[index % len(LINES)]
        label = f"{shorten(curve.name, 26)}, {number(curve.rms, 3)} {panel.unit} rms"
        ax.plot(curve.frequency, curve.density, color=color, linestyle=style, linewidth=1.4, label=label)
    highest = max(float(curve.density.max()) for curve in panel.curves)
    lowest = min(float(curve.density[curve.density > 0.0].min()) for curve in panel.curves)
    ax.set_xscale("log")
    ax.set_yscale("log")
    ax.set_ylim(max(0.5 * lowest, highest * 10.0**-DECADES), 3.0 * highest)
    first = min(float(curve.frequency[0]) for curve in panel.curves)
    last = max(float(curve.frequency[-1]) for curve in panel.curves)
    ax.set_xlim(first, last)
    transform = ax.get_xaxis_transform()
    ax.plot(
        panel.modes, np.full(len(panel.modes), 0.02), transform=transform, linestyle="none", marker="|",
        markersize=6.0, color=GREY, markeredgewidth=1.0,
    )  # fmt: skip
    ticks = [
        step * 10.0**decade
        for decade in range(math.floor(math.log10(first)), math.ceil(math.log10(last)) + 1)
        for step in (1.0, 2.0, 5.0)
    ]
    ticks = [tick for tick in ticks if first <= tick <= last]
    ax.set_xticks(ticks, [f"{tick:g}" for tick in ticks])
    ax.set_xticks([], minor=True)
    _decades(ax)
    ax.set_xlabel("frequency [Hz]", fontsize=7.5, labelpad=1.0)
    ax.set_ylabel(f"[{_squared(panel.unit)}/Hz]", fontsize=8.0)
    ax.yaxis.set_label_coords(-0.135, 0.5)
    if panel.is_input:
        ax.legend(loc="lower left", fontsize=6.8, frameon=False, bbox_to_anchor=(0.0, 0.03))
    lines = "\n".join(shorten(line, 62) for line in panel.title.split("\n"))
    ax.text(
        0.0, 1.04, lines, transform=ax.transAxes, fontsize=7.8, va="bottom", linespacing=1.25, color=BLACK
    )


def _decades(ax: "Axes") -> None:
    low, high = ax.get_ylim()
    decades = range(math.ceil(math.log10(low)), math.floor(math.log10(high)) + 1)
    step = 1 if len(decades) < 5 else 2
    shown = [d for d in decades if d % step == 0]
    ax.set_yticks([10.0**d for d in shown], [_power_of_ten(d) for d in shown])
    ax.set_yticks([], minor=True)


def _power_of_ten(exponent: int) -> str:
    return f"{10.0**exponent:g}" if -3 <= exponent <= 3 else f"10{str(exponent).translate(RAISED)}"


def _squared(unit: str) -> str:
    if not unit:
        return "1"
    return f"({unit})²" if any(sign in unit for sign in " /²") else f"{unit}²"
