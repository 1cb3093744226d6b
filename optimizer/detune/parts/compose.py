"""What may stand at a station besides one mount: several in parallel, a damper beside it, an absorber, or nothing."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from typing import TYPE_CHECKING

from detune.parts.kinds.mount import Axes, Mount
from detune.parts.laws import UnknownDamping

if TYPE_CHECKING:
    from detune.parts.kinds.absorber import Absorber
    from detune.parts.kinds.damper import Damper

EMPTY = "(empty)"


def in_parallel(mount: Mount, count: int) -> Mount:
    """Return `count` equal mounts side by side as one: stiffness, damping, loads, mass and cost times the count.

    Deflections stay those of one mount. Raises ValueError below one mount.
    """
    if count < 1:
        raise ValueError(f"{count} mounts in parallel")
    if count == 1:
        return mount
    curve = mount.load_curve
    unknown = mount.damping_unknown
    return replace(
        mount,
        part=f"{count} x {mount.part}",
        base=mount.part,
        pieces=count,
        stiffness_static=_times(mount.stiffness_static, count),
        stiffness_dynamic=_times(mount.stiffness_dynamic, count),
        viscous=_times(mount.viscous, count),
        load_min=count * mount.load_min,
        load_max=count * mount.load_max,
        load_rated=None if mount.load_rated is None else count * mount.load_rated,
        mass=None if mount.mass is None else count * mount.mass,
        cost=count * mount.cost,
        load_curve=None if curve is None else replace(curve, load=tuple(count * load for load in curve.load)),
        damping_unknown=None
        if unknown is None
        else UnknownDamping(unknown.loss_factor, _times(unknown.viscous, count)),
    )


def with_damper(mount: Mount, damper: Damper) -> Mount:
    """Return a mount with a damper beside it: its coefficients added, and its travel as a limit of deflection.

    The damper is fitted at its middle at the working height, so the mount may move half its stroke from there;
    with the sag of the mount that is at least the deflection limit taken here. Raises ValueError where the two do
    not simply add: a mount whose dashpot stands in series with a spring, or a damper with elastic rods.
    """
    reason = damper_refused(mount, damper)
    if reason is not None:
        raise ValueError(reason)
    x, y, z = mount.viscous
    lateral = damper.viscous_lateral
    stroke = 0.5 * damper.stroke
    limit = stroke if mount.deflection_max is None else min(mount.deflection_max, stroke)
    return replace(
        mount,
        part=f"{mount.part} + {damper.part}",
        base=mount.base or mount.part,
        damper=damper.part,
        viscous=(None if x is None else x + lateral, None if y is None else y + lateral, z + damper.viscous),
        deflection_max=limit,
        mass=None if mount.mass is None else mount.mass + (damper.mass or 0.0),
        cost=mount.cost + damper.cost,
        damper_cost=damper.cost,
        temperature_min=_known(max, mount.temperature_min, damper.temperature_min),
        temperature_max=_known(min, mount.temperature_max, damper.temperature_max),
        damper_catalog=damper.catalog,
        damper_breaks=damper.cost_breaks,
        damper_stock=damper.stock,
    )


def damper_refused(mount: Mount, damper: Damper) -> str | None:
    """Return why a damper cannot be added to a mount here, or None."""
    if mount.relaxation is not None:
        return f"{mount.part} has its dashpot in series with a spring; a damper beside it does not simply add"
    if damper.stiffness_series is not None:
        return f"{damper.part} has elastic rods; a damper beside a mount is taken as rigid in itself"
    return None


def retuned(absorber: Absorber, frequency: float) -> Mount:
    """Return an absorber set to another tuning (Hz), with its own mass, damping ratio and stroke.

    Raises ValueError outside the frequencies between which it can be set.
    """
    low, high = absorber.frequency_min, absorber.frequency_max
    if low is None or high is None:
        raise ValueError(f"{absorber.part} cannot be set")
    if not low <= frequency <= high:
        raise ValueError(f"{absorber.part} can be set between {low:g} Hz and {high:g} Hz")
    name = f"{absorber.part} at {frequency:g} Hz"
    return replace(absorber_mount(replace(absorber, frequency=frequency)), part=name, base=absorber.part)


def absorber_mount(absorber: Absorber) -> Mount:
    """Return an absorber as the spring and dashpot between its moving mass and its frame, along its own axis.

    k = m (2 pi f)^2 and c = 2 z m 2 pi f of the tuning f and damping ratio z on a fixed base. A tolerance t of the
    tuning is one of (1 + t)^2 - 1 of the stiffness. It carries its own mass alone, so no load range is stated.
    """
    omega = 2.0 * math.pi * absorber.frequency
    return replace(
        empty_station(absorber.catalog),
        file=absorber.file,
        line=absorber.line,
        part=absorber.part,
        family="absorber",
        stiffness_static=(0.0, 0.0, absorber.mass * omega**2),
        stiffness_dynamic=(0.0, 0.0, absorber.mass * omega**2),
        viscous=(0.0, 0.0, 2.0 * absorber.damping_ratio * absorber.mass * omega),
        damping_from="damping_ratio",
        damping_stated=absorber.damping_ratio,
        damping_kind="viscous",
        mass=absorber.mass + absorber.mass_fixed,
        cost=absorber.cost,
        cost_breaks=absorber.cost_breaks,
        tolerance=(1.0 + absorber.tolerance) ** 2 - 1.0,
        stock=absorber.stock,
        pieces=1,
        moving_mass=absorber.mass,
        riding_mass=absorber.mass_fixed,
        stroke=absorber.stroke,
    )


def empty_station(catalog: str) -> Mount:
    """Return the part that stands for nothing: no stiffness, no limit, no cost."""
    nothing: Axes = (0.0, 0.0, 0.0)
    return Mount(
        catalog=catalog,
        file="",
        line=0,
        part=EMPTY,
        family="",
        stiffness_static=nothing,
        stiffness_dynamic=nothing,
        loss_factor=nothing,
        viscous=nothing,
        damping_from="",
        damping_stated=0.0,
        load_min=-math.inf,
        load_max=math.inf,
        load_rated=None,
        deflection_max=None,
        pulls=True,
        free_height=None,
        mass=0.0,
        cost=0.0,
        tolerance=0.0,
        # What is not there is fit for every temperature.
        temperature_min=-math.inf,
        temperature_max=math.inf,
        stock=None,
        pieces=0,
    )


def _known(narrower: Callable[[float, float], float], one: float | None, other: float | None) -> float | None:
    """Return the end of the temperatures that both take, None where one of them is not stated."""
    return None if one is None or other is None else narrower(one, other)


def _times(figures: Axes, count: int) -> Axes:
    x, y, z = figures
    return (None if x is None else count * x, None if y is None else count * y, count * z)
