"""The figures that a purchase specification states of the parts of every group, and parts that have them.

Every figure that the proof stands on is one: stiffness in vibration along and across, under a steady load, and
damping. So a maker's part whose figures all lie within the table is one of the parts that were proven. A figure that
the study gives and does not seek is tried from TRIED times below to TRIED times above what is given.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.brief.sizing import SizingUnknown
from detune.parts.kinds.mount import Axes, Mount
from detune.response.design import Design
from detune.response.model import Model
from detune.sizing.made_parts import Made, sizing_of

Floats = NDArray[np.float64]
What = Literal["axial", "lateral", "x", "y", "lateral ratio", "loss factor", "viscous", "static"]
TRIED = 2.0
# A bound of zero has no logarithm: a figure is tried down to this share of the design's.
FROM_ZERO = 1e-3
# The local axes of a part that a figure of lateral stiffness is of.
ACROSS: dict[str, tuple[int, ...]] = {"lateral": (0, 1), "x": (0,), "y": (1,)}


@dataclass(frozen=True)
class Figure:
    """One figure of the parts of a group: its value (SI) in the design, and how far it is tried (low, high).

    `sought`: the study seeks it, so that low and high are its own bounds.
    """

    group: str
    what: What
    value: float
    low: float
    high: float
    sought: bool

    @property
    def title(self) -> str:
        """The figure in words."""
        words = {
            "axial": "axial dynamic stiffness",
            "lateral": "lateral dynamic stiffness",
            "x": "dynamic stiffness along x",
            "y": "dynamic stiffness along y",
            "lateral ratio": "lateral over axial dynamic stiffness",
            "loss factor": "loss factor",
            "viscous": "viscous damping",
            "static": "axial static stiffness",
        }
        return f"{words[self.what]} of {self.group}"

    @property
    def unit(self) -> str:
        """Kind of unit of the figure."""
        units = {"loss factor": "ratio", "lateral ratio": "ratio", "viscous": "damping"}
        return units.get(self.what, "stiffness")


def figures_of(brief: Brief, made: Made, model: Model) -> tuple[Figure, ...]:
    """The figures of every group's parts in a design; `model` says which local axes can move at all."""
    found: list[Figure] = []
    for number, group in enumerate(made.design.groups):
        mount = made.design.mounts[number]
        own = [unknown for unknown in sizing_of(brief).unknown if unknown.group == group]
        found.append(_figure(group, "axial", mount.stiffness_dynamic[2], _of(own, "stiffness", "axial")))
        rows = [station.rows for station in model.stations if station.group == number]
        if any(np.any(row[:2]) for row in rows):
            found += _lateral(group, mount, own)
        if mount.loss_factor[2]:
            found.append(_figure(group, "loss factor", mount.loss_factor[2], _of(own, "loss-factor")))
        if mount.viscous[2]:
            found.append(_figure(group, "viscous", mount.viscous[2], _of(own, "viscous")))
        found.append(_figure(group, "static", mount.stiffness_static[2], None))
    return tuple(found)


def _of(own: list[SizingUnknown], kind: str, axis: str | None = None) -> SizingUnknown | None:
    return next((u for u in own if u.kind == kind and u.axis == axis), None)


def _figure(group: str, what: What, value: float, unknown: SizingUnknown | None) -> Figure:
    if unknown is None:
        return Figure(group, what, value, value / TRIED, value * TRIED, sought=False)
    low, high = unknown.bounds
    return Figure(group, what, value, min(low or FROM_ZERO * value, value), max(high, value), sought=True)


def _lateral(group: str, mount: Mount, own: list[SizingUnknown]) -> list[Figure]:
    """Own figures of what is sought across the part; the ratio to the axial stiffness for the rest."""
    found = []
    free = {0, 1}
    for what, axes in ACROSS.items():
        unknown = _of(own, "stiffness", what)
        value = mount.stiffness_dynamic[axes[0]]
        if unknown is not None and value:
            found.append(_figure(group, what, value, unknown))  # type: ignore[arg-type]
            free -= set(axes)
    sideways = [mount.stiffness_dynamic[axis] for axis in sorted(free)]
    if sideways and sideways[0]:
        found.append(_figure(group, "lateral ratio", sideways[0] / mount.stiffness_dynamic[2], None))
    return found


def axes_of(figure: Figure, figures: Sequence[Figure]) -> tuple[int, ...]:
    """The local axes whose dynamic stiffness a figure multiplies."""
    own = {axis for other in figures if other.group == figure.group for axis in ACROSS.get(other.what, ())}
    if figure.what in ACROSS:
        return ACROSS[figure.what]
    rest = tuple(axis for axis in (0, 1) if axis not in own)
    return {"axial": (*rest, 2), "lateral ratio": rest}.get(figure.what, ())


def made_of(made: Made, figures: Sequence[Figure], values: Floats) -> Made:
    """The design with parts that have these figures (F,); whatever no figure is of stays as it is."""
    mounts = []
    for group, mount in zip(made.design.groups, made.design.mounts, strict=True):
        shares = {
            figure.what: (figure, value / figure.value)
            for figure, value in zip(figures, values.tolist(), strict=True)
            if figure.group == group
        }
        mounts.append(_with(mount, figures, shares))
    return Made(made.brief, Design(made.design.groups, tuple(mounts), made.design.ballast))


def _with(mount: Mount, figures: Sequence[Figure], shares: dict[What, tuple[Figure, float]]) -> Mount:
    dynamic = [1.0, 1.0, 1.0]
    for figure, share in shares.values():
        for axis in axes_of(figure, figures):
            dynamic[axis] *= share
    static = shares["static"][1]
    return replace(
        mount,
        stiffness_dynamic=_scaled(mount.stiffness_dynamic, dynamic),
        stiffness_static=_scaled(mount.stiffness_static, [static] * 3),
        loss_factor=_scaled(
            mount.loss_factor, [shares["loss factor"][1] if "loss factor" in shares else 1.0] * 3
        ),
        viscous=_scaled(mount.viscous, [shares["viscous"][1] if "viscous" in shares else 1.0] * 3),
    )


def _scaled(axes: Axes, shares: list[float]) -> Axes:
    scaled = [None if k is None else share * k for k, share in zip(axes, shares, strict=True)]
    return scaled[0], scaled[1], axes[2] * shares[2]
