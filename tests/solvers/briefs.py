"""Small random briefs with ballast, empty stations, parts in parallel and dampers, and instances as statements."""

from __future__ import annotations

from typing import Any

import numpy as np

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.sag import Sag
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.tilt import Tilt
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.allowable.velocity import Velocity
from detune.brief.brief import Brief
from detune.brief.choice import Ballast, CatalogSource, Choice, Objectives
from detune.brief.machine import Station
from detune.parts.catalog import Catalog
from detune.parts.kinds.damper import Damper
from detune.parts.kinds.mount import Mount
from detune.problem.build import Problem, build
from detune.proof.selection_data import Selection
from detune.solvers.nondominated import as_minimised, nondominated
from detune.solvers.outcome import Outcome
from detune.solvers.pyomo_statement import Statement, ToneSet
from response import machines


def damper(name: str, c: float, cost: float, stroke: float = 0.06, lateral: float = 0.0) -> Damper:
    return Damper(
        catalog="dashpots", file="dashpots.csv", line=2, part=name, viscous=c, viscous_lateral=lateral,
        stiffness_series=None, stroke=stroke, force_max=None, tolerance=0.3, mass=None, cost=cost,
        temperature_min=None, temperature_max=None, stock=None,
    )  # fmt: skip


def dampers(*parts: Damper) -> Catalog:
    return Catalog("dashpots", "damper", parts, (), "dashpots.csv")


def parts_list(random: np.random.Generator, count: int) -> tuple[Mount, ...]:
    """Mounts from soft to stiff at prices of no order; whole prices, so that ties occur."""
    stiffness = np.geomspace(5e4, 2.5e6, count) * random.uniform(0.8, 1.2, count)
    return tuple(
        machines.mount(
            f"p{i}",
            float(k),
            lateral=float(k * random.uniform(0.3, 1.2)),
            static=0.8,
            loss=float(random.uniform(0.05, 0.2)),
            cost=float(random.integers(5, 14)),
            load_min=float(random.choice([-1e9, 0.0, 60.0])),
            load_max=float(random.uniform(900, 2600)),
            deflection_max=float(random.uniform(0.006, 0.03)),
            pulls=bool(random.integers(2)),
        )
        for i, k in enumerate(stiffness)
    )


def small_problem(seed: int, trade: tuple[str, str] | None = None, most: int = 4) -> Problem:
    """A random skid of two or three groups with choices of every kind; some limits are asked for, some are not."""
    random = np.random.default_rng([seed, 77])
    brief, _ = machines.random_machine(seed, flexible_floor=bool(random.integers(2)))
    three = seed % 3 == 0
    stations = tuple(
        station.model_copy(
            update={
                "axial": "z",
                "radial": "x",
                "parallel": 1,
                "group": "mid" if three and i == 1 else station.group,
            }
        )
        for i, station in enumerate(brief.stations)
    )
    if three:
        # A third group that the machine can stand without.
        stations = (*stations[:1], stations[1].model_copy(update={"group": "left"}), *stations[2:])
        stations += (Station(name="M", group="mid", position=(0.05, 0.02, 0.0)),)
    groups = tuple(dict.fromkeys(station.group for station in stations))
    parts = parts_list(random, int(random.integers(3, most + 1)))
    kinds = random.permutation(len(groups))
    choices = tuple(
        Choice(
            group=group,
            catalogs=("list",),
            parallel=(1, 2) if kinds[i] == 0 else (1,),
            dampers=("dashpots",) if kinds[i] == 1 else (),
            empty=group == "mid" or (seed % 5 == 0 and kinds[i] == 1),
        )
        for i, group in enumerate(groups)
    )
    loose = float(random.uniform(0.5, 2.0))
    allowables: list[Any] = [
        Displacement(at="P", direction="resultant", measure="peak", limit=4e-3 * loose),
        TransmittedForce(through="floor", direction="z", measure="rms", limit=1400.0 * loose),
    ]
    further = (
        Separation(limit=0.05),
        Tilt(limit=0.02),
        Sag(at="P", limit=0.02),
        Velocity(at="P", direction="z", measure="rms", limit=0.15 * loose),
        Acceleration(at="P", direction="x", measure="peak-to-peak", limit=120.0 * loose),
        TransmittedForce(through="each-station", direction="axial", measure="peak", limit=900.0 * loose),
    )
    allowables += [each for each in further if random.integers(2)]
    steps: tuple[float, ...] = (0.0, 60.0, 150.0)[: int(random.integers(1, 4))]
    stated: Brief = brief.model_copy(
        update={
            "gravity_stiffness": bool(random.integers(2)),
            "stations": stations,
            "choices": choices,
            "allowables": tuple(allowables),
            "catalogs": (
                CatalogSource(name="list", file="list.csv"),
                CatalogSource(name="dashpots", file="dashpots.csv", kind="damper"),
            ),
            "conditions": (brief.conditions[0].model_copy(update={"shafts": {"rotor": (26.0, 30.0)}}),),
            "forcing": (
                brief.forcing[0].model_copy(update={"frequency": 45.0}),
                brief.forcing[1].model_copy(update={"unbalance": 1e-3}),
            ),
            "ballast": Ballast(position=(0.0, 0.0, 0.1), size=(0.8, 0.5, 0.1), steps=steps, cost_per_kg=0.05),
            "objectives": Objectives(
                trade=trade or (("cost", "separation"), ("cost", "least-margin"))[seed % 2]
            ),
        }
    )
    dashpots = dampers(damper("d1", 900.0, 3.0), damper("d2", 3000.0, 6.0, lateral=400.0))
    return build(stated, {"list": machines.catalog(*parts), "dashpots": dashpots})


def front_of(outcome: Outcome, problem: Problem, digits: int = 7) -> list[tuple[float, float]]:
    """Cost and the other objective of every nondominated design of a finished search, rounded, in order of cost."""
    assert outcome.stopped == "finished" and outcome.record.accounted
    if not outcome.designs.count:
        return []
    cost, other = (outcome.objectives[name] for name in problem.brief.objectives.trade)
    kept = nondominated(as_minimised(outcome.objectives, problem.brief.objectives.trade))
    return sorted({(round(float(cost[i]), 9), round(float(other[i]), digits)) for i in kept})


def statement_of_selection(selection: Selection) -> Statement:
    """A selection instance (without base motion) as the statement of a second opinion."""
    assert not selection.harmonic.base.any()
    cases, fixed = selection.harmonic, selection.fixed
    lower, upper = [], []
    for number in range(len(selection.station_group)):
        g = selection.groups[selection.station_group[number]]
        k = g.kappa_static[:, 2]
        safe = np.where(k > 0.0, k, 1.0)
        lower.append(np.where(k > 0.0, g.load_min / safe, -np.inf))
        upper.append(np.where(k > 0.0, np.minimum(g.load_max / safe, g.deflection_max), np.inf))
    steps = len(selection.ballast.cost)
    return Statement(
        rows=selection.stations,
        group=selection.station_group.astype(np.intp),
        parallel=np.array([float(selection.groups[g].count) for g in selection.station_group]),
        cost=tuple(g.cost for g in selection.groups),
        step_cost=selection.ballast.cost,
        static=tuple(g.kappa_static for g in selection.groups),
        dynamic=tuple(g.kappa_dynamic for g in selection.groups),
        loss=tuple(g.loss for g in selection.groups),
        viscous=tuple(g.viscous for g in selection.groups),
        lower=tuple(lower),
        upper=tuple(upper),
        fixed_static=fixed.static,
        fixed_dynamic=np.repeat(fixed.dynamic[None], steps, axis=0),
        fixed_hysteretic=fixed.hysteretic,
        fixed_viscous=fixed.viscous,
        mass=selection.ballast.mass,
        load=selection.ballast.load,
        sag_rows=selection.static_rows.rows,
        least=selection.static_rows.lower,
        most=selection.static_rows.upper,
        bands=np.stack([selection.bands.low, selection.bands.high], axis=1),
        separation=selection.bands.separation,
        tones=tuple(
            ToneSet(1.0, float(f), float(f), ((load, 0),), cases.rows, limit, np.zeros(len(limit)))
            for f, load, limit in zip(cases.frequency, cases.load, cases.row_limit, strict=True)
        ),
    )
