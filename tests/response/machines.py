"""Machines made in Python for tests of the whole program: a mass on one mount, and random six-axis machines."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from detune.brief.allowable.base import Allowable
from detune.brief.allowable.displacement import Displacement
from detune.brief.brief import Brief
from detune.brief.choice import CatalogSource, Choice
from detune.brief.condition import Condition
from detune.brief.floor import Floor
from detune.brief.forcing.base import Forcing
from detune.brief.forcing.harmonic_force import HarmonicForce
from detune.brief.forcing.rotating_unbalance import RotatingUnbalance
from detune.brief.machine import Body, Connection, InertiaTensor, Point, Station
from detune.parts.catalog import Catalog
from detune.parts.kinds.mount import Mount
from detune.problem.build import Problem, build
from detune.problem.stages import stages
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.response.design import Design
from detune.response.designs import Designs

RPM = 1.0 / 60.0
RAD = 1.0 / (2.0 * np.pi)
RIGID = Floor(kind="rigid")


def mount(
    name: str = "m",
    k: float = 1e5,
    *,
    lateral: float | None = None,
    static: float = 1.0,
    loss: float = 0.0,
    c: float = 0.0,
    c_lateral: float = 0.0,
    cost: float = 10.0,
    load_min: float = -1e9,
    load_max: float = 1e9,
    deflection_max: float | None = None,
    pulls: bool = True,
) -> Mount:
    """A mount of axial dynamic stiffness k (N/m); `static` is the static share of every stiffness."""
    side = (lateral, lateral)
    side_static = (None, None) if lateral is None else (static * lateral, static * lateral)
    side_loss = (None, None) if lateral is None else (loss, loss)
    side_c = (None, None) if lateral is None else (c_lateral, c_lateral)
    return Mount(
        catalog="list", file="list.csv", line=2, part=name, family="rubber",
        stiffness_static=(*side_static, static * k), stiffness_dynamic=(*side, k),
        loss_factor=(*side_loss, loss), viscous=(*side_c, c),
        damping_from="loss_factor", damping_stated=loss, load_min=load_min, load_max=load_max, load_rated=None,
        deflection_max=deflection_max, pulls=pulls, free_height=None, mass=None, cost=cost, tolerance=0.15,
        temperature_min=None, temperature_max=None, stock=None,
    )  # fmt: skip


def catalog(*mounts: Mount, name: str = "list") -> Catalog:
    parts = tuple(replace(part, catalog=name) for part in mounts)
    return Catalog(name, "mount", parts, (), f"{name}.csv")


def far_limit(**changes: Any) -> Displacement:
    """A limit on the displacement of point P along z that nothing reaches."""
    return Displacement(**{"at": "P", "direction": "z", "measure": "peak", "limit": 1e6, **changes})


def force(frequency: Any, size: float = 1.0, **changes: Any) -> HarmonicForce:
    """A vertical harmonic force at the centre, N at Hz."""
    stated = {"name": "force", "frequency": frequency, "position": (0.0, 0.0, 0.0), "force": (0.0, 0.0, size)}
    return HarmonicForce(**{**stated, **changes})


def unbalance(me: float, **changes: Any) -> RotatingUnbalance:
    """An unbalance (kg m) on shaft "rotor", turning about x at the centre."""
    stated = {
        "name": "unbalance",
        "shaft": "rotor",
        "position": (0.0, 0.0, 0.0),
        "axis": "x",
        "unbalance": me,
    }
    return RotatingUnbalance(**{**stated, **changes})


def brief_of(**changes: Any) -> Brief:
    """A brief with the tables every test needs filled in; `changes` replace them."""
    groups = dict.fromkeys(station.group for station in changes["stations"])
    stated: dict[str, Any] = {
        "title": "test",
        # Textbook machines and the reference libraries leave it out; tests/response/test_gravity.py has it.
        "gravity_stiffness": False,
        "floor": RIGID,
        "conditions": (Condition(name="running"),),
        "catalogs": (CatalogSource(name="list", file="list.csv"),),
        "choices": tuple(Choice(group=group, catalogs=("list",)) for group in groups),
        "allowables": (far_limit(),),
    }
    return Brief(**{**stated, **changes})


def one_axis(
    mass: float,
    forcing: Forcing | Sequence[Forcing],
    allowables: Sequence[Allowable] = (),
    *,
    parallel: int = 1,
    shafts: dict[str, tuple[float, float]] | None = None,
    **changes: Any,
) -> Brief:
    """A mass that moves vertically alone, on one station at its centre, with point P at the centre."""
    return brief_of(
        **{
            "bodies": (Body(name="machine", free=("z",), mass=mass, centre=(0.0, 0.0, 0.0)),),
            "points": (Point(name="P", position=(0.0, 0.0, 0.0)),),
            "stations": (Station(name="S", group="G", position=(0.0, 0.0, 0.0), parallel=parallel),),
            "conditions": (Condition(name="running", shafts=shafts or {}),),
            "forcing": (forcing,) if isinstance(forcing, Forcing) else tuple(forcing),
            "allowables": (far_limit(), *allowables),
            **changes,
        }
    )


def assessed(brief: Brief, *mounts: Mount, ballast: float = 0.0) -> Assessment:
    """The assessment of the design with these mounts, one for each group."""
    return assess(brief, Design(brief.groups, mounts, ballast))


def value(assessment: Assessment, kind: str, place: str | None = None, condition: str | None = None) -> float:
    """The value of the only requirement of this kind (at the place, in the condition)."""
    (row,) = [
        row
        for row in assessment.margins
        if row.kind == kind and place in (None, row.place) and condition in (None, row.condition)
    ]
    return row.value


def batch_margins(problem: Problem, designs: Designs) -> dict[tuple[str, str, str], np.ndarray]:
    """The margins (D,) of the batch evaluation by (quantity, place, condition), whole range, no bounds."""
    found = {}
    for stage in stages(problem):
        if not stage.bound:
            for requirement, margins in zip(stage.requirements, stage.margins(designs), strict=True):
                key = (requirement.allowable.quantity(), requirement.place, requirement.condition)
                found[key] = margins
    return found


def batch_value(brief: Brief, part: Mount, allowable: Allowable) -> float:
    """The value of an allowable with a fixed limit in a one-part problem, by the batch evaluation."""
    problem = build(brief, {"list": catalog(part)})
    margins = batch_margins(problem, Designs(np.zeros((1, 1), dtype=np.intp), np.zeros(1, dtype=np.intp)))
    (margin,) = [m[0] for (quantity, _, _), m in margins.items() if quantity == allowable.quantity()]
    return float(allowable.limit / (1.0 + margin))  # type: ignore[attr-defined]


def both(brief: Brief, part: Mount, allowable: Allowable, rel: float) -> float:
    """The assessor's value, after making sure that the batch evaluation has the same."""
    brief = brief.model_copy(update={"allowables": (allowable,)})
    one = value(assessed(brief, part), allowable.kind)
    assert batch_value(brief, part, allowable) == pytest.approx(one, rel=rel)
    return float(one)


def assert_batch_equals_assessor(brief: Brief, mounts: tuple[Mount, ...], rel: float = 1e-3) -> None:
    """Every stated margin of the assessment is that of the batch evaluation."""
    problem = build(brief, {"list": catalog(*mounts)})
    pairs = zip(problem.candidates, mounts, strict=True)
    parts = np.array([[[m.part for m in group].index(mount.part) for group, mount in pairs]])
    margins = batch_margins(problem, Designs(parts, np.zeros(1, dtype=np.intp)))
    stated = {allowable.kind for allowable in brief.allowables}
    for row in assessed(brief, *mounts).margins:
        if row.kind in stated:
            other = float(margins[(row.quantity, row.place, row.condition)][0])
            assert 1.0 + other == pytest.approx(1.0 + row.margin, rel=rel), row.label


def random_machine(
    seed: int, *, viscous: bool = False, flexible_floor: bool = True
) -> tuple[Brief, tuple[Mount, ...]]:
    """A six-axis machine: offset centre, products of inertia, inclined and parallel stations, a pipe, base motion.

    Returns the brief and two mounts, one for each of its groups. Numbers are of the order of a pump skid.
    """
    random = np.random.default_rng(seed)

    def place(spread: float = 0.4) -> tuple[float, float, float]:
        x, y, z = random.uniform(-spread, spread, 3)
        return float(x), float(y), float(z)

    turn, _ = np.linalg.qr(random.normal(size=(3, 3)))
    tensor = turn @ np.diag(random.uniform(20.0, 30.0, 3)) @ turn.T
    inertia = InertiaTensor(
        xx=tensor[0, 0], yy=tensor[1, 1], zz=tensor[2, 2], xy=tensor[0, 1], xz=tensor[0, 2], yz=tensor[1, 2]
    )
    corners = [(-0.6, -0.4), (-0.6, 0.4), (0.6, -0.4), (0.6, 0.4)]
    stations = tuple(
        Station(
            name=f"S{i}",
            group="left" if x < 0 else "right",
            position=(x + float(random.normal(0, 0.03)), y, float(random.normal(0, 0.05))),
            axial=(float(random.normal(0, 0.3)), float(random.normal(0, 0.3)), 1.0),
            radial=(1.0, float(random.normal()), 0.0),
            parallel=1 + i % 2,
        )
        for i, (x, y) in enumerate(corners)
    )
    damping: dict[str, Any] = (
        {"viscous": tuple(random.uniform(10, 90, 3))} if viscous else {"loss_factor": 0.08}
    )
    pipe = Connection(name="pipe", position=place(), stiffness=tuple(random.uniform(2e3, 2e4, 3)), **damping)
    floor = (
        Floor(kind="mass-spring-damper", mass=2500.0, stiffness=8e6, damping=6e3) if flexible_floor else RIGID
    )
    direction = tuple(random.normal(size=3))
    forcing = (
        HarmonicForce(
            name="hum", frequency=(10.0, 60.0), position=place(), force=tuple(random.normal(0, 50, 3)),
            moment=tuple(random.normal(0, 5, 3)),
        ),
        unbalance(2e-3, position=place(), axis=tuple(random.normal(size=3))),
    )  # fmt: skip
    brief = brief_of(
        bodies=(Body(name="machine", mass=400.0, centre=place(0.1), inertia=inertia),),
        points=(Point(name="P", position=place()),),
        stations=stations,
        connections=(pipe,),
        floor=floor,
        conditions=(Condition(name="running", shafts={"rotor": (12.0, 30.0)}),),
        forcing=forcing,
        allowables=(far_limit(direction=direction),),
    )
    mounts = tuple(
        mount(
            name,
            float(random.uniform(1e5, 6e5)),
            lateral=float(random.uniform(5e4, 2e5)),
            static=0.8,
            loss=0.0 if viscous else float(random.uniform(0.02, 0.2)),
            c=float(random.uniform(100, 600)) if viscous else 0.0,
            c_lateral=float(random.uniform(100, 600)) if viscous else 0.0,
        )
        for name in ("a", "b")
    )
    return brief, mounts
