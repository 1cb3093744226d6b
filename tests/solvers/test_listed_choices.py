"""Absorbers, ballast and pads from lists on random machines: bounded search = enumeration, and more parts
never cost more.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.brief.absorber import Absorber
from detune.brief.brief import Brief
from detune.brief.choice import Ballast, CatalogSource, Choice
from detune.brief.machine import Point
from detune.parts.catalog import Catalog
from detune.parts.kinds.absorber import Absorber as AbsorberPart
from detune.parts.kinds.ballast import Ballast as Piece
from detune.parts.kinds.pad import Pad
from detune.problem.build import Problem, build
from detune.response.assess import assess
from detune.response.designs import all_designs, total_cost
from detune.solvers import bounded, choose, enumeration, second_opinion
from detune.solvers.outcome import Settings
from solvers import briefs

machines = briefs.machines


def absorber(name: str, mass: float, frequency: float, cost: float, stroke: float = 0.02) -> AbsorberPart:
    return AbsorberPart(
        catalog="absorbers", file="a.csv", line=2, part=name, mass=mass, mass_fixed=0.1 * mass,
        frequency=frequency, frequency_min=None, frequency_max=None, damping_ratio=0.08, stroke=stroke,
        tolerance=0.02, cost=cost, stock=None, cost_breaks=((2, 0.8 * cost),),
    )  # fmt: skip


def piece(name: str, mass: float, cost: float, stock: int | None = None) -> Piece:
    return Piece("pieces", "b.csv", 2, name, mass, 0.3, 0.2, 0.05, 0.05, cost, stock, ((2, 0.7 * cost),))


def pad(name: str, modulus: float, price: float) -> Pad:
    return Pad(
        catalog="pads", file="p.csv", line=2, part=name, family="rubber", hardness=None, modulus=modulus,
        modulus_shear=0.3 * modulus, shape_constant=0.7, dynamic_to_static=1.2, loss_factor=0.1,
        thickness=0.02, sheet_width=0.5, sheet_length=1.0, cut_min=0.03, shape_min=None, shape_max=None,
        pressure_max=1.5e6, strain_max=0.3, area_density=None, cost_per_m2=price, tolerance=0.15,
        temperature_min=None, temperature_max=None,
    )  # fmt: skip


def lists(**parts: tuple[Any, ...]) -> dict[str, Catalog]:
    kinds = {
        "absorbers": "absorber",
        "pieces": "ballast",
        "pads": "pad",
        "dashpots": "damper",
        "list": "mount",
    }
    return {name: Catalog(name, kinds[name], rows, (), f"{name}.csv") for name, rows in parts.items()}


def stated(problem: Problem, **changes: Any) -> Brief:
    """The brief of a small problem with absorbers and ballast from lists."""
    brief = problem.brief
    update: dict[str, Any] = {
        "points": (*brief.points, Point(name="Q", position=(0.2, 0.1, 0.4))),
        "absorbers": (
            Absorber(name="one", at="P", direction="z", catalogs=("absorbers",), empty=True),
            Absorber(name="two", at="Q", direction=(0.0, 1.0, 1.0), catalogs=("absorbers",), empty=True),
        ),
        "ballast": Ballast(position=(0.0, 0.0, 0.1), catalogs=("pieces",), pieces=2),
        "catalogs": (
            *brief.catalogs,
            CatalogSource(name="absorbers", file="a.csv", kind="absorber"),
            CatalogSource(name="pieces", file="b.csv", kind="ballast"),
        ),
        **changes,
    }
    return brief.model_copy(update=update)


def mounts_of(problem: Problem) -> tuple[Any, ...]:
    known = {m.part: m for group in problem.candidates for m in group if m.pieces == 1 and not m.damper}
    return tuple(replace(mount, catalog="list") for mount in known.values())


def built(seed: int) -> Problem:
    plain = briefs.small_problem(seed, most=3)
    catalogs = lists(
        list=mounts_of(plain),
        dashpots=(briefs.damper("d1", 900.0, 3.0),),
        absorbers=(absorber("light", 3.0, 26.0, 4.0), absorber("heavy", 8.0, 29.0, 7.0, stroke=0.0005)),
        pieces=(piece("plate", 40.0, 2.0, stock=1), piece("block", 25.0, 1.5)),
    )
    return build(stated(plain), catalogs)


def check(seed: int) -> bool:
    problem = built(seed)
    assert bounded.refusal(problem) is None
    assert second_opinion.refusal(problem) is not None
    listed, searched = (solver.solve(problem, Settings()) for solver in (enumeration, bounded))
    assert briefs.front_of(listed, problem, digits=6) == briefs.front_of(searched, problem, digits=6)
    for outcome in (listed, searched):
        if outcome.designs.count:
            best = problem.design(outcome.designs, int(np.argmin(outcome.objectives["cost"])))
            judged = assess(problem.brief, best)
            assert judged.meets
            assert judged.cost == pytest.approx(float(outcome.objectives["cost"].min()), rel=1e-12)
    return bool(listed.designs.count)


@pytest.mark.parametrize("seed", [1, 4])
def test_bounded_search_equals_enumeration_with_absorbers_and_pieces(seed: int) -> None:
    check(seed)


@pytest.mark.nightly
def test_bounded_search_equals_enumeration_on_many_machines() -> None:
    assert sum(check(seed) for seed in range(5, 30)) > 8


def test_auto_says_why_it_goes_through_designs_one_by_one() -> None:
    """Modes exempted by amplification are beyond the bounds; so is a trade with added mass."""
    problem = built(1)
    assert choose(problem)[0] == "enumeration"
    assert "one by one" in choose(problem)[1]


def test_the_same_absorber_twice_reaches_its_price_break() -> None:
    """Two of "light" at 0.8 x 4 each, and two blocks at 0.7 x 1.5 each."""
    problem = built(2)
    every = all_designs(problem.model, 0, problem.count)
    costs = total_cost(problem.model, every)
    one, two = (problem.brief.groups.index(name) for name in ("one", "two"))
    bare = np.flatnonzero(
        (every.part[:, one] == 2)
        & (every.part[:, two] == 2)
        & (problem.model.ballast_mass[every.step] == 0.0)
    )[0]
    same = every.part == every.part[bare]
    same[:, [one, two]] = True
    both = (every.part[:, one] == 0) & (every.part[:, two] == 0) & same.all(axis=1)
    blocks = np.array([step.part == "2 x block" for step in problem.model.ballast])[every.step]
    (index,) = np.flatnonzero(both & blocks)
    assert costs[index] - costs[bare] == pytest.approx(2 * 0.8 * 4.0 + 2 * 0.7 * 1.5, rel=1e-12)


ABSORBERS = tuple(absorber(f"a{i}", 2.0 + i, 20.0 + 2.0 * i, 3.0 + (5 * i) % 4) for i in range(4))
PIECES = tuple(piece(f"b{i}", 10.0 + 15.0 * i, 1.0 + (3 * i) % 4) for i in range(3))
PADS = tuple(pad(f"p{i}", 1.5e6 + 1e6 * i, 900.0 - 150.0 * i) for i in range(3))
MOUNTS = tuple(
    machines.mount(f"m{i}", 1.2e5 * 1.7**i, loss=0.1, cost=6.0 + (7 * i) % 5, load_max=3000.0)
    for i in range(3)
)


def least(**parts: tuple[Any, ...]) -> float:
    """The least cost of a mass on two groups, mounts and pads, with an absorber and ballast from these lists."""
    limit = machines.far_limit(limit=0.12e-3)
    from detune.brief.machine import Station

    stations = tuple(Station(name=n, group=g, position=(0.0, 0.0, 0.0)) for n, g in (("S", "a"), ("T", "b")))
    brief = machines.one_axis(
        100.0,
        machines.force((24.0, 26.0), 150.0),
        [limit],
        stations=stations,
        choices=(
            Choice(group="a", catalogs=("list",)),
            Choice(group="b", catalogs=("pads",), sizes=((0.06, 0.06), (0.08, 0.1)), empty=True),
        ),
        catalogs=(
            CatalogSource(name="list", file="list.csv"),
            CatalogSource(name="pads", file="p.csv", kind="pad"),
            CatalogSource(name="absorbers", file="a.csv", kind="absorber"),
            CatalogSource(name="pieces", file="b.csv", kind="ballast"),
        ),
        absorbers=(Absorber(name="one", at="P", direction="z", catalogs=("absorbers",), empty=True),),
        ballast=Ballast(position=(0.0, 0.0, 0.1), catalogs=("pieces",), pieces=2),
    )
    outcome = enumeration.solve(build(brief, lists(**parts)), Settings())
    assert outcome.record.accounted
    return float(outcome.objectives["cost"].min()) if outcome.designs.count else np.inf


def some(parts: tuple[Any, ...]) -> Any:
    return st.lists(st.sampled_from(parts), min_size=1, unique=True).map(tuple)


@settings(deadline=None, max_examples=12)
@given(some(MOUNTS), some(PADS), some(ABSORBERS), some(PIECES), st.data())
def test_adding_a_part_never_raises_the_least_cost(
    mounts: Any, pads: Any, absorbers: Any, pieces: Any, data: st.DataObject
) -> None:
    chosen = {"list": mounts, "pads": pads, "absorbers": absorbers, "pieces": pieces}
    every = {"list": MOUNTS, "pads": PADS, "absorbers": ABSORBERS, "pieces": PIECES}
    name = data.draw(st.sampled_from(sorted(chosen)))
    more = data.draw(st.sampled_from(every[name]))
    wider = chosen[name] if more in chosen[name] else (*chosen[name], more)
    assert least(**{**chosen, name: wider}) <= least(**chosen) * (1.0 + 1e-12)
