"""Tables of a sized absorber: beside the closed forms of the literature, and off its tuning."""

from __future__ import annotations

import math

from detune.ground.units import show
from detune.report.tables import Table
from detune.report.words import number, percent
from detune.sizing.made_parts import sizing_of
from detune.study.size import SizingResult

WORST = "worst response over its limit"


def forms_table(result: SizingResult) -> Table:
    """The sized absorber first, then every closed form judged by the same equations."""
    best = result.answer
    assert best is not None
    worst = next((d.worst_response for d in result.detuned if d.share == 0.0), math.nan)
    rows = []
    for body in dict.fromkeys(form.absorber for form in result.closed_forms):
        own = [form for form in result.closed_forms if form.absorber == body]
        sized = {
            unknown.kind: value
            for unknown, value in zip(
                sizing_of(result.study.brief).unknown, best.values.tolist(), strict=True
            )
            if unknown.body == body
        }
        damping = sized.get("absorber-damping")
        rows.append(
            (
                body,
                "as sized",
                "this study",
                number(own[0].mass_ratio, 4),
                show(sized["absorber-tuning"], "frequency", 6),
                "as stated" if damping is None else number(damping, 5),
                "",
                number(worst, 5),
            )
        )
        for form in own:
            rows.append(
                (
                    body,
                    form.name,
                    form.best_for if form.within else f"{form.best_for} (outside the stated bounds)",
                    number(form.mass_ratio, 4),
                    show(form.tuning, "frequency", 6),
                    number(form.damping, 5),
                    "" if math.isnan(form.height) else number(form.height, 5),
                    number(form.worst_response, 5),
                )
            )
    columns = ("absorber", "tuning by", "best for", "mass ratio", "tuning", "damping ratio", "height", WORST)
    note = (
        "A closed form is for one mass on one spring under its own excitation; the machine is taken as that "
        "on the axial stiffness of its own parts. Damping ratio: of the absorber's own frequency. Height: "
        "what the form promises, the greatest magnitude over the static value, or the variance under white "
        "noise of unit intensity. The last column judges every form by the study's own equations, limits and "
        "ranges."
    )
    return Table("Absorber beside closed forms", columns, tuple(rows), frozenset({3, 4, 5, 6, 7}), note)


def forms_text(result: SizingResult) -> str:
    """The sized absorber beside the closed form that comes nearest, for the terminal; empty where none is sized."""
    if (
        not result.closed_forms
        or result.answer is None
        or sizing_of(result.study.brief).goal != "worst-response"
    ):
        return ""
    worst = next((d.worst_response for d in result.detuned if d.share == 0.0), math.nan)
    best = min(result.closed_forms, key=lambda form: form.worst_response)
    return (
        f"Absorber beside {len(result.closed_forms)} closed forms: {WORST} {number(worst, 5)} as sized, "
        f"{number(best.worst_response, 5)} by the best of them ({best.name}: {best.best_for}; "
        f"{show(best.tuning, 'frequency', 5)}, damping {number(best.damping, 4)}"
        f"{'' if best.within else '; outside the stated bounds'})"
    )


def detuning_table(result: SizingResult) -> Table:
    """What an absorber off its tuning does to the worst response."""
    rows = tuple(
        (each.unknown, f"{each.share:+.0%}", number(each.worst_response, 4)) for each in result.detuned
    )
    note = "One unknown off, everything else as sized. Above 1 a limit on a response is missed."
    return Table("Detuning", ("unknown", "off by", WORST), rows, frozenset({1, 2}), note)


def scatter_table(result: SizingResult) -> Table:
    """What the stated scatter does to the worst response."""
    rows = tuple(
        (
            each.absorber,
            f"{percent(each.tuning[0])} to +{percent(each.tuning[1])}",
            number(each.nominal, 4),
            number(each.greatest, 4),
            f"+{percent(each.greatest / each.nominal - 1.0)}",
            str(each.points),
        )
        for each in result.scattered
    )
    first = result.scattered[0]
    corners = "every corner" if first.all_corners else "some corners"
    note = (
        f"Scatter: {'; '.join(first.stated) or 'none, for parts made to order have no listed tolerance'}. "
        f"Judged at {corners} of the scatter and at random points inside: no proof, and the truth may be a "
        "little higher. Off its tuning: by the scatter of its own springs and mass alone."
    )
    columns = (
        "absorber",
        "off its tuning",
        f"{WORST}, as sized",
        "with scatter",
        "grows by",
        "points judged",
    )
    return Table("Absorber under the stated scatter", columns, rows, frozenset({2, 3, 4, 5}), note)
