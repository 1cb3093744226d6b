"""The map of stiffness against damping: what the limits leave, with every part that may be chosen as a dot."""

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from detune.brief.allowable.load_range import LoadRange
from detune.brief.brief import Brief
from detune.parts.kinds.mount import Mount
from detune.problem.build import Problem, with_mounts
from detune.problem.requirement import Requirement
from detune.report.plots.style import BLACK, GREY, LINES, VERMILION, Floats, Titles, shorten
from detune.report.quick_stages import has_slow_parts, quick_stages, stage_margins
from detune.response.assessment import Assessment
from detune.response.design import Design
from detune.response.designs import Designs
from detune.study.run import Result

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

TITLE = "Map of stiffness against damping"
STIFFNESSES = 36
DAMPINGS = 14
LINES_SHOWN = 7
LEAST_LOSS = 1e-3
SHADE = "#EBEBEB"
LARGEST = 3.0
TWO_PI = 2.0 * np.pi


@dataclass(frozen=True)
class LimitField:
    """One requirement (the least over its places) over the map: `margin` (DAMPINGS, STIFFNESSES)."""

    label: str
    margin: Floats


@dataclass(frozen=True)
class PartDot:
    """A part as if it stood at every station: total axial stiffness N/m, loss factor, and the groups that may take it.

    `carries` tells whether the load, shared equally, lies in the part's load range.
    """

    part: str
    stiffness: float
    loss_factor: float
    groups: tuple[str, ...]
    in_answer: tuple[str, ...]
    carries: bool


@dataclass(frozen=True)
class MapData:
    """The map round one design.

    `stiffness` (S,) N/m and `loss_factor` (L,) span it; `fields` are the requirements whose limits cross
    it, the one that leaves least first; `always_failed` are those missed all over it. `here` is the
    design itself: the sum of its parts' axial stiffness and their loss factor weighted by it.
    """

    subject: str
    stiffness: Floats
    loss_factor: Floats
    fields: tuple[LimitField, ...]
    always_failed: tuple[str, ...]
    parts: tuple[PartDot, ...]
    here: tuple[float, float]
    ballast: float
    without_slow: bool

    @property
    def least(self) -> Floats:
        """Least margin (L, S) of all requirements that cross the map or are missed all over it."""
        if self.always_failed:
            return np.full((len(self.loss_factor), len(self.stiffness)), -1.0)
        if not self.fields:
            return np.full((len(self.loss_factor), len(self.stiffness)), np.inf)
        return np.asarray(np.min([field.margin for field in self.fields], axis=0))


def data(result: Result) -> MapData | None:
    """Return the numbers of the plot, None where no design was assessed."""
    subject = result.subject
    if subject is None:
        return None
    brief, problem = result.study.brief, result.problem
    omega = _vertical_omega(brief, subject)
    parts = _parts(brief, problem, subject, omega)
    here = _design_point(brief, subject.design, omega)
    stiffness, loss = _axes_of(parts, here)
    fields, failed = _fields(brief, problem, subject.design, stiffness, loss)
    return MapData(
        subject="the answer" if result.answer is not None else "the closest design",
        stiffness=stiffness,
        loss_factor=loss,
        fields=fields,
        always_failed=failed,
        parts=parts,
        here=here,
        ballast=subject.design.ballast,
        without_slow=has_slow_parts(problem),
    )


def pieces_in_group(brief: Brief, group: str) -> int:
    """Return how many parts a group takes, those in parallel counted each."""
    return sum(station.parallel for station in brief.stations if station.group == group)


def equivalent_loss_factor(mount: Mount, omega: float) -> float:
    """Return the axial loss factor of a part at omega (rad/s): eta + c omega / k."""
    return mount.loss_factor[2] + mount.viscous[2] * omega / mount.stiffness_dynamic[2]


def _carries(mount: Mount) -> bool:
    """Whether it carries the machine: not an empty station, nor an absorber, which keep what they are on the map."""
    return mount.pieces > 0 and mount.moving_mass == 0.0


def _vertical_omega(brief: Brief, subject: Assessment) -> float:
    """Angular frequency of the mode that moves the most mass vertically, at which viscous damping is compared."""
    share = [mode.participation[2] for mode in subject.modes]
    return TWO_PI * subject.modes[int(np.argmax(np.nan_to_num(share)))].frequency


def _design_point(brief: Brief, design: Design, omega: float) -> tuple[float, float]:
    total = lost = 0.0
    for group, mount in zip(design.groups, design.mounts, strict=True):
        if not _carries(mount):
            continue
        stiffness = pieces_in_group(brief, group) * mount.stiffness_dynamic[2]
        total += stiffness
        lost += stiffness * equivalent_loss_factor(mount, omega)
    return total, lost / total


def _parts(brief: Brief, problem: Problem, subject: Assessment, omega: float) -> tuple[PartDot, ...]:
    pieces = sum(station.parallel for station in brief.stations)
    share = subject.total_load / pieces
    groups: dict[Mount, list[str]] = {}
    for group in problem.model.groups:
        for mount in filter(_carries, group.mounts):
            groups.setdefault(mount, []).append(group.name)
    chosen: dict[Mount, list[str]] = {}
    for name, mount in zip(subject.design.groups, subject.design.mounts, strict=True):
        if not _carries(mount):
            continue
        chosen.setdefault(mount, []).append(name)
        groups.setdefault(mount, [])
    return tuple(
        PartDot(
            part=mount.part,
            stiffness=pieces * mount.stiffness_dynamic[2],
            loss_factor=equivalent_loss_factor(mount, omega),
            groups=tuple(names),
            in_answer=tuple(chosen.get(mount, ())),
            carries=mount.load_min <= share <= mount.load_max,
        )
        for mount, names in groups.items()
    )


def _axes_of(parts: tuple[PartDot, ...], here: tuple[float, float]) -> tuple[Floats, Floats]:
    stiffness = np.array([part.stiffness for part in parts] + [here[0]])
    loss = np.maximum(np.array([part.loss_factor for part in parts] + [here[1]]), LEAST_LOSS)
    lows = (min(stiffness.min(), 0.5 * here[0]) / 1.15, max(loss.min() / 1.4, 0.7 * LEAST_LOSS))
    highs = (max(stiffness.max(), 2.0 * here[0]) * 1.15, loss.max() * 1.4)
    return np.geomspace(lows[0], highs[0], STIFFNESSES), np.geomspace(lows[1], highs[1], DAMPINGS)


def scaled_mount(mount: Mount, axial: float, loss: float) -> Mount:
    """Return a part scaled to an axial dynamic stiffness (N/m) and a loss factor on all axes.

    Its lateral and static stiffness keep their ratios to the axial dynamic one; its load range is lifted.
    """
    if not _carries(mount):
        return mount
    factor = axial / mount.stiffness_dynamic[2]

    def scale(axes: tuple[float | None, float | None, float]) -> tuple[float, float, float]:
        return (factor * (axes[0] or 0.0), factor * (axes[1] or 0.0), factor * axes[2])

    return replace(
        mount,
        stiffness_static=scale(mount.stiffness_static),
        stiffness_dynamic=scale(mount.stiffness_dynamic),
        loss_factor=(loss, loss, loss),
        viscous=(0.0, 0.0, 0.0),
        load_min=0.0,
        load_max=np.inf,
    )


def _fields(
    brief: Brief, problem: Problem, design: Design, stiffness: Floats, loss: Floats
) -> tuple[tuple[LimitField, ...], tuple[str, ...]]:
    """Evaluate every requirement on the scaled machine at all nodes of the map, as a batch of designs."""
    total = sum(station.parallel for station in brief.stations)
    nodes = [(k / total, eta) for eta in loss.tolist() for k in stiffness.tolist()]
    scaled = [tuple(scaled_mount(mount, k, eta) for k, eta in nodes) for mount in design.mounts]
    changed = with_mounts(problem, tuple(scaled))
    step = (
        changed.model.ballast.index(design.stack)
        if design.stack in changed.model.ballast
        else int(np.abs(changed.model.ballast_mass - design.ballast).argmin())
    )
    numbers = np.arange(len(nodes), dtype=np.intp)
    designs = Designs(
        np.repeat(numbers[:, None], len(scaled), axis=1), np.full(len(nodes), step, dtype=np.intp)
    )
    found: dict[str, Floats] = {}
    for stage in quick_stages(changed):
        for requirement, margin in zip(stage.requirements, stage_margins(stage, designs), strict=True):
            if isinstance(requirement.allowable, LoadRange):
                continue
            label = _label(requirement)
            found[label] = np.minimum(found[label], margin) if label in found else margin
    shape = (len(loss), len(stiffness))
    failed = tuple(label for label, margin in found.items() if bool((margin < 0.0).all()))
    crossing = [
        LimitField(label, margin.reshape(shape))
        for label, margin in found.items()
        if bool((margin < 0.0).any()) and bool((margin >= 0.0).any())
    ]
    crossing.sort(key=lambda field: int((field.margin >= 0.0).sum()))
    return tuple(crossing), failed


def _label(requirement: Requirement) -> str:
    return f"{requirement.allowable.quantity()} ({requirement.condition})"


def caption(data: MapData) -> str:
    """Return what the plot shows, in words: above all what is scaled."""
    text = (
        "What is scaled: every station carries one part of the same axial dynamic stiffness (the axis is the sum over "
        "all parts) and the same loss factor on all axes; the ratios of lateral and of static to axial dynamic "
        f"stiffness stay as in the parts of {data.subject} of the same group, the ballast at {data.ballast:g} kg, part "
        "deflection limits as listed; load ranges are lifted. Lines: where a requirement, at its worst place, equals "
        "its limit. White: all of them met; shaded: at least one missed. Dots: each part that may be "
        "chosen, as if used at every station, open where the load shared equally is outside its load range; viscous "
        "damping is read as a loss factor at the vertical natural frequency. "
        f"A real design with different parts in its groups lies between its dots, and a dot has its own ratios; the "
        f"diamond is {data.subject} as it is. The map shows which way to go; only the margins table judges."
    )
    if data.without_slow:
        text += " Pulses, records and passages through speeds are left out of the map; with them lines lie closer in."
    if data.always_failed:
        text += " Missed everywhere on this map: " + "; ".join(data.always_failed) + "."
    if len(data.fields) > LINES_SHOWN:
        more = len(data.fields) - LINES_SHOWN
        text += f" {more} further limit lines, which leave more, are not named; all are in the shading."
    return text


def size(data: MapData) -> tuple[float, float]:
    """Return width and height in inches."""
    named = min(len(data.fields), LINES_SHOWN)
    return 8.6, 5.2 + 0.165 * (named + 3)


def draw(data: MapData, figure: "Figure") -> Titles:
    """Draw the map and return the hover texts of its dots."""
    width, height = size(data)
    ax = figure.add_axes((0.7 / width, (height - 4.8) / height, (width - 0.95) / width, 4.7 / height))
    x, y = data.stiffness / 1e3, data.loss_factor
    if data.always_failed:
        ax.set_facecolor(SHADE)
    for field in data.fields:
        ax.contourf(x, y, _drawable(field.margin), levels=[-LARGEST, 0.0], colors=[SHADE], zorder=0)
    handles = _limit_lines(ax, data)
    titles = _dots(ax, data)
    ax.set_xscale("log")
    ax.set_yscale("log")
    ax.set_xlim(x[0], x[-1])
    ax.set_ylim(y[0], y[-1])
    _plain(ax)
    ax.set_xlabel("total axial dynamic stiffness of all parts [N/mm]")
    ax.set_ylabel("loss factor [-]")
    figure.legend(
        handles=handles, loc="lower left", bbox_to_anchor=(0.5 / width, 0.0), ncols=1, fontsize=7.5, frameon=False,
        handlelength=4.0, labelspacing=0.25,
    )  # fmt: skip
    return titles


def _drawable(margin: Floats) -> Floats:
    """Return log(1 + margin), which runs nearly straight on log axes, so that a line drawn between nodes fits."""
    return np.asarray(np.clip(np.log1p(np.maximum(margin, -0.95)), -LARGEST, LARGEST))


def _limit_lines(ax: "Axes", data: MapData) -> "list[Artist]":
    from matplotlib.lines import Line2D

    handles: list[Artist] = []
    x, y = data.stiffness / 1e3, data.loss_factor
    for index, field in enumerate(data.fields[:LINES_SHOWN]):
        colour, style = LINES[index % len(LINES)]
        ax.contour(
            x, y, _drawable(field.margin), levels=[0.0], colors=[colour], linewidths=1.6,
            linestyles=[style], zorder=3,
        )  # fmt: skip
        handles.append(
            Line2D([], [], color=colour, linestyle=style, linewidth=1.6, label=shorten(field.label, 110))
        )
    handles.append(
        Line2D([], [], color=VERMILION, marker="D", markersize=6, linestyle="none", label=f"{data.subject}")
    )
    hollow = "a part whose load range does not hold the load shared equally"
    for label, colour, face in (("a part, as if at every station", BLACK, BLACK), (hollow, GREY, "none")):
        dot = Line2D(
            [],
            [],
            color=colour,
            markerfacecolor=face,
            marker="o",
            markersize=4,
            linestyle="none",
            label=label,
        )
        handles.append(dot)
    return handles


def _dots(ax: "Axes", data: MapData) -> Titles:
    titles: Titles = {}
    kinds = (("parts", False, True), ("overloaded", False, False), ("chosen", True, True))
    for gid, chosen, carries in kinds:
        dots = [p for p in data.parts if bool(p.in_answer) is chosen and (chosen or p.carries is carries)]
        if not dots:
            continue
        x = [part.stiffness / 1e3 for part in dots]
        y = [max(part.loss_factor, LEAST_LOSS) for part in dots]
        if chosen:
            drawn = ax.scatter(x, y, s=80, facecolors="none", edgecolors=BLACK, linewidths=1.4, zorder=6)
            for part, a, b in zip(dots, x, y, strict=True):
                # A name on the right half would run over the edge of the map.
                left = a > float(np.sqrt(data.stiffness[0] * data.stiffness[-1])) / 1e3
                ax.annotate(
                    f"{part.part} ({', '.join(part.in_answer)})", (a, b), xytext=(-8 if left else 8, 7),
                    textcoords="offset points", ha="right" if left else "left", fontsize=8, zorder=7,
                    bbox={"facecolor": "white", "edgecolor": "none", "pad": 0.8, "alpha": 0.8},
                )  # fmt: skip
        elif carries:
            drawn = ax.scatter(x, y, s=16, color=BLACK, linewidths=0, zorder=4)
        else:
            drawn = ax.scatter(x, y, s=13, facecolors="none", edgecolors=GREY, linewidths=0.7, zorder=4)
        drawn.set_gid(gid)
        titles[gid] = tuple(
            f"{p.part}: {p.stiffness / 1e3:.4g} N/mm in total, loss factor {p.loss_factor:.3g}; "
            f"may be chosen for {', '.join(p.groups) or 'no group'}; "
            + (
                "the load shared equally is in its range"
                if p.carries
                else "the load shared equally is outside its range"
            )
            for p in dots
        )
    ax.plot([data.here[0] / 1e3], [data.here[1]], marker="D", color=VERMILION, markersize=6, zorder=5)
    return titles


def _plain(ax: "Axes") -> None:
    for low_high, setter in ((ax.get_xlim(), ax.set_xticks), (ax.get_ylim(), ax.set_yticks)):
        low, high = low_high
        decades = range(int(np.floor(np.log10(low))), int(np.ceil(np.log10(high))) + 1)
        values = [step * 10.0**decade for decade in decades for step in (1.0, 2.0, 5.0)]
        shown = [value for value in values if low <= value <= high]
        setter(shown, [f"{value:g}" for value in shown])
        setter([], minor=True)
