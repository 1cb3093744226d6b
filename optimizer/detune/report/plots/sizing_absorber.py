"""A sized absorber: the response that binds it over frequency, tuned and off its tuning, and what detuning costs."""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from detune.report.plots.style import BLACK, GREY, LIGHT, LINES, Floats, Titles
from detune.report.response_data import ResponseCurve, response_curves
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.sizing.made_parts import made_design, sizing_of
from detune.study.size import SizingResult

if TYPE_CHECKING:
    from matplotlib.figure import Figure

TITLE = "Absorber"


@dataclass(frozen=True)
class AbsorberData:
    """`curves`: name, frequency in Hz and response over its limit (each (F,)) of the sized design and others.

    `judged` is the interval of frequency in which the limit holds. `detuning` (2, N): share, worst response
    over the limit. `stated`: detuning by the stated scatter, None where none is stated. `quantity` names what
    is drawn.
    """

    quantity: str
    curves: tuple[tuple[str, Floats, Floats], ...]
    judged: tuple[float, float]
    absorber: str
    detuning: Floats
    stated: tuple[float, float] | None


def data(result: SizingResult) -> AbsorberData | None:
    """Return the numbers of the plot, None where no absorber was sized."""
    best = result.answer
    if best is None or not result.closed_forms:
        return None
    body = result.closed_forms[0].absorber
    unknowns = sizing_of(result.study.brief).unknown
    place = next(k for k, u in enumerate(unknowns) if u.kind == "absorber-tuning" and u.body == body)
    scattered = next((each for each in result.scattered if each.absorber == body), None)
    if scattered is not None:
        shares, stated = scattered.curve, scattered.tuning
    else:
        rows = [(d.share, d.worst_response) for d in result.detuned if d.unknown == unknowns[place].title]
        shares, stated = np.array(rows).T, None
    shifts = (stated[0], stated[1]) if stated is not None else (-0.05, 0.05)
    designs = [("as sized", best.values)]
    designs += [(f"tuning {100.0 * s:+.2g} %", _shifted(best.values, place, s)) for s in shifts if s != 0.0]
    form = min((f for f in result.closed_forms if f.absorber == body), key=lambda f: f.worst_response)
    at = best.values.copy()
    at[place] = form.tuning
    at[[k for k, u in enumerate(unknowns) if u.kind == "absorber-damping" and u.body == body]] = form.damping
    designs.append((f"closed form, {form.name}", at))
    found = _curves(result, designs)
    if found is None:
        return None
    quantity, curves, judged = found
    return AbsorberData(quantity, curves, judged, body, shares, stated)


def _shifted(values: Floats, place: int, share: float) -> Floats:
    changed = values.copy()
    changed[place] *= 1.0 + share
    return changed


def _curves(
    result: SizingResult, designs: list[tuple[str, Floats]]
) -> tuple[str, tuple[tuple[str, Floats, Floats], ...], tuple[float, float]] | None:
    """The tightest harmonic requirement of the sized design over frequency, for every design."""
    brief = result.study.brief
    chosen: ResponseCurve | None = None
    curves = []
    for name, values in designs:
        made = made_design(brief, values)
        judged: Assessment = assess(made.brief, made.design)
        own = [curve for curve in response_curves(made.brief, judged) if curve.inside.any()]
        if not own:
            return None
        if chosen is None:
            chosen = min(own, key=lambda c: c.row.margin)
        same = next(c for c in own if c.row.label == chosen.row.label and c.source == chosen.source)
        curves.append((name, same.speed, same.value / same.limit))
    assert chosen is not None
    return chosen.row.label, tuple(curves), (chosen.low, chosen.high)


def caption(data: AbsorberData) -> str:
    """Return what the plot shows, in words."""
    text = (
        f"Left: {data.quantity}, over its limit; shaded, where it is judged. Right: the worst response over "
        "its limit "
    )
    text += f"with the tuning of {data.absorber} off and everything else as sized"
    if data.stated is not None:
        text += "; shaded, what the stated scatter of its own springs and mass makes of the tuning"
    return text + "."


def size(data: AbsorberData) -> tuple[float, float]:
    """Return width and height in inches."""
    return 8.6, 3.9


def draw(data: AbsorberData, figure: "Figure") -> Titles:
    """Draw both panels."""
    left = figure.add_axes((0.075, 0.14, 0.5, 0.8))
    for (name, speed, value), (colour, style) in zip(data.curves, LINES, strict=False):
        left.plot(speed, value, color=colour, linestyle=style, linewidth=1.2, label=name)
    low, high = data.judged
    left.axvspan(low, high, color=LIGHT, linewidth=0, zorder=0)
    left.axhline(1.0, color=BLACK, linewidth=0.8)
    left.set_xlim(0.8 * low, 1.2 * high if high > low else 1.6 * high)
    shown = [value[(speed >= 0.8 * low) & (speed <= 1.2 * high)] for _, speed, value in data.curves]
    left.set_ylim(0.0, 1.15 * max([1.0, *(float(v.max()) for v in shown if v.size)]))
    left.set_xlabel("frequency [Hz]")
    left.set_ylabel("response over its limit [-]")
    left.legend(fontsize=7.5, frameon=False, loc="upper right")
    right = figure.add_axes((0.68, 0.14, 0.3, 0.8))
    share, worst = data.detuning
    if data.stated is not None:
        right.axvspan(100.0 * data.stated[0], 100.0 * data.stated[1], color=LIGHT, linewidth=0, zorder=0)
    right.plot(100.0 * share, worst, color=LINES[0][0], linewidth=1.2)
    right.axhline(1.0, color=BLACK, linewidth=0.8)
    right.axvline(0.0, color=GREY, linewidth=0.6)
    right.set_ylim(0.0, 1.15 * max(1.0, float(worst.max())))
    right.set_xlabel("tuning off by [%]")
    right.set_ylabel("worst response over its limit [-]")
    return {}
