"""Speeds not to dwell at: stated by the brief, and found for each design."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import small_studies as small
from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.dwell_bands import DwellBands
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.transmissibility import Transmissibility
from detune.brief.allowable.velocity import Velocity
from detune.brief.brief import Brief
from detune.brief.choice import Ballast, Objectives
from detune.brief.condition import Condition
from detune.brief.cross_check import cross_check
from detune.brief.dwell import joined, left_of, without_barred
from detune.brief.forcing.shaft_orders import Order, ShaftOrders
from detune.brief.read import read_brief, scan_brief
from detune.brief.state import State
from detune.physics.crossing import stretches_above
from detune.problem.build import build
from detune.report.page import sections
from detune.report.tables_dwell import dwell_table
from detune.response.assess import assess
from detune.response.design import Design
from detune.response.designs import all_designs
from detune.response.direct import DirectMachine
from detune.response.direct_supremum import amplitudes_at, coherent_sets, tones_of
from detune.solvers import SOLVERS
from detune.solvers.outcome import Settings
from detune.study.front import assessed_front
from detune.study.load import load_study
from detune.study.run import run_study
from response import law_machines as laws
from response import machines
from response import test_two_ways as two_ways

TWO_PI = 2.0 * math.pi
RPM = 1.0 / 60.0
M, K, C, ME = 120.0, 4.0e5, 500.0, 2.0e-3
RANGE = (6.0, 18.0)
TIMES = st.floats(0.0, 10.0)


@settings(deadline=None, max_examples=60)
@given(st.lists(st.tuples(TIMES, TIMES).map(sorted), max_size=5), TIMES)
def test_what_is_left_is_what_no_band_holds(bands: list[list[float]], point: float) -> None:
    """A speed is left, or strictly inside a band, or on an edge; every one of 50,000 speeds by comparison."""
    barred = tuple((a, b) for a, b in bands)
    left = left_of(2.0, 8.0, barred)
    inside = any(a < point < b for a, b in barred)
    assert all(a < b for a, b in left)
    assert all(left[i][1] <= left[i + 1][0] for i in range(len(left) - 1))
    if inside or not 2.0 <= point <= 8.0:
        assert not any(a < point < b for a, b in left)
    edge = any(point in band for band in barred)
    if 2.0 <= point <= 8.0 and not inside and not edge:
        assert any(a <= point <= b for a, b in left)


def test_bands_are_joined_across_the_narrowest_gaps() -> None:
    bands = [(1.0, 2.0), (6.0, 7.0), (2.5, 3.0), (1.5, 2.2), (9.0, 9.5)]
    assert joined(bands) == ((1.0, 2.2), (2.5, 3.0), (6.0, 7.0), (9.0, 9.5))
    assert joined(bands, 3) == ((1.0, 3.0), (6.0, 7.0), (9.0, 9.5))
    assert joined(bands, 1) == ((1.0, 9.5),)


def test_stretches_of_known_curves() -> None:
    """sin x > 0.5 on (pi/6, 5 pi/6) + 2 pi n, cut off at 14; and a needle at 3 that only its centre tells of."""
    found = stretches_above(lambda x: np.sin(x) - 0.5, 0.0, 14.0, [], [])
    expected = [[math.pi / 6 + n * TWO_PI, min(5 * math.pi / 6 + n * TWO_PI, 14.0)] for n in range(3)]
    assert np.array(found) == pytest.approx(np.array(expected), abs=1e-8)

    def needle(x: np.ndarray) -> np.ndarray:
        return 2.0 / (1.0 + ((x - 3.0) / 1e-6) ** 2) - 1.0

    ((low, high),) = stretches_above(needle, 0.0, 14.0, [3.0], [1e-6])
    assert (low - 3.0, high - 3.0) == pytest.approx((-1e-6, 1e-6), rel=1e-3)


def fan(*more: Any, mass: float = M, barred: Any = None, **changes: Any) -> Brief:
    condition = Condition(name="running", shafts={"rotor": RANGE}, barred=barred or {})
    return machines.one_axis(mass, machines.unbalance(ME), more, **{"conditions": (condition,), **changes})


def size(speed: np.ndarray, k: float = K, c: float = C, mass: float = M) -> np.ndarray:
    """Displacement under rotating unbalance, peak: m e w^2 / |k - m w^2 + j w c|."""
    w = TWO_PI * np.asarray(speed)
    return np.asarray(ME * w**2 / np.abs(k - mass * w**2 + 1j * w * c))


def edges(limit: float) -> tuple[float, float]:
    """Where the displacement is at the limit: (m e)^2 x^2 = L^2 ((k - m x)^2 + c^2 x) with x = w^2, a quadratic."""
    a = ME**2 - limit**2 * M**2
    b = limit**2 * (2.0 * K * M - C**2)
    low, high = sorted(np.roots([a, b, -(limit**2) * K**2]).real)
    return float(np.sqrt(low)) / TWO_PI, float(np.sqrt(high)) / TWO_PI


class TestStated:
    """Barred bands that the brief states."""

    bands = ((8.0, 9.6), (9.4, 10.2), (17.0, 20.0))

    def test_limits_hold_over_what_is_left(self) -> None:
        """The resonance at 9.19 Hz is barred: of what is left the values at its edges count, by the closed form."""
        limit = Displacement(at="P", direction="z", measure="peak", limit=1.0)
        found = machines.assessed(fan(limit, barred={"rotor": self.bands}), machines.mount(k=K, c=C))
        rows = {r.condition: r for r in found.margins if r.kind == "displacement" and r.upper == 1.0}
        assert sorted(rows) == [
            "running, rotor 360 to 480 rev/min",
            "running, rotor 612 to 1020 rev/min",
        ]
        low, high = (rows[name] for name in sorted(rows))
        assert low.value == pytest.approx(float(size(np.array(8.0))), rel=1e-9)
        assert high.value == pytest.approx(float(size(np.array(10.2))), rel=1e-9)
        assert (low.frequency, high.frequency) == (8.0, 10.2)

    def test_separation_counts_what_is_left(self) -> None:
        """f_n = sqrt(k/m)/2 pi = 9.189 Hz lies above 8 Hz by f/8 - 1 and below 10.2 Hz by 1 - f/10.2."""
        natural = math.sqrt(K / M) / TWO_PI
        found = machines.assessed(fan(barred={"rotor": self.bands}), machines.mount(k=K, c=C))
        assert found.separation == pytest.approx(1.0 - natural / 10.2, rel=1e-9)
        assert machines.assessed(fan(), machines.mount(k=K, c=C)).separation < 0.0

    def test_batch_agrees(self) -> None:
        limit = Velocity(at="P", direction="z", measure="rms", limit=1e-3)
        problem = build(
            fan(limit, barred={"rotor": self.bands}), {"list": machines.catalog(machines.mount(k=K, c=C))}
        )
        margins = machines.batch_margins(problem, all_designs(problem.model, 0, 1))
        found = assess(problem.brief, problem.design(all_designs(problem.model, 0, 1), 0))
        for row in found.margins:
            if row.kind == "velocity":
                assert margins[row.quantity, row.place, row.condition][0] == pytest.approx(
                    row.margin, rel=1e-6
                )

    def test_two_shafts_are_judged_in_every_combination(self) -> None:
        both = Condition(
            name="running", shafts={"rotor": RANGE, "pump": (20.0, 30.0)},
            barred={"rotor": ((8.0, 10.0),), "pump": ((22.0, 23.0),)},
        )  # fmt: skip
        brief = fan(conditions=(both,))
        other = machines.unbalance(ME, name="other", shaft="pump")
        pieces = without_barred(brief.model_copy(update={"forcing": (*brief.forcing, other)}))
        assert [c.shafts for c in pieces.conditions] == [
            {"rotor": r, "pump": p} for r in ((6.0, 8.0), (10.0, 18.0)) for p in ((20.0, 22.0), (23.0, 30.0))
        ]

    def test_report_lists_them(self) -> None:
        brief = without_barred(fan(barred={"rotor": self.bands}))
        table = dwell_table(brief, machines.assessed(brief, machines.mount(k=K, c=C)))
        assert table is not None
        assert [row[2:4] for row in table.rows[:3]] == [
            ("480.0", "576.0"),
            ("564.0", "612.0"),
            ("1020.0", "1200.0"),
        ]
        # 8 to 10.2 Hz and 17 to 18 Hz of 12 Hz: 192 of 720 rev/min.
        assert table.rows[3][4] == "192.0" and table.rows[3][5].startswith("in all, 26.7 %")
        (note,) = [
            n for n in build(brief, {"list": machines.catalog(machines.mount(k=K))}).assumed if "barred" in n
        ]
        assert "which no condition with a run-up or coast-down judges" in note


def limited(limit: float, width: float, **changes: Any) -> tuple[Displacement, DwellBands]:
    return (
        Displacement(at="P", direction="z", measure="peak", limit=limit),
        DwellBands(shaft="rotor", width=width, **changes),
    )


class TestFound:
    """Bands found for each design."""

    @pytest.mark.parametrize("limit", [2e-5, 3e-5, 5e-5, 1.5e-4])
    def test_edges_are_the_roots_of_a_quadratic(self, limit: float) -> None:
        """Both ways within 1e-7 of the roots and never inside them."""
        low, high = edges(limit)
        # At 20 um the upper edge is out of the range.
        high = min(high, RANGE[1])
        brief = fan(*limited(limit, 4.0))
        part = machines.mount(k=K, c=C)
        found = machines.assessed(brief, part)
        ((band),) = found.barred
        problem = build(brief, {"list": machines.catalog(part)})
        ((first, last),) = problem.dwell[0].bands(all_designs(problem.model, 0, 1)) or ()
        for a, b in ((band.low, band.high), (first, last)):
            assert (a, b) == pytest.approx((low, high), rel=1e-7)
            assert a <= low * (1.0 + 1e-12) and b >= high * (1.0 - 1e-12)
        row = next(r for r in found.margins if r.kind == "dwell-bands")
        assert row.value == pytest.approx(high - low, rel=1e-6)
        assert row.margin == pytest.approx(4.0 / (high - low) - 1.0, rel=1e-6)
        assert found.meets == (high - low <= 4.0)

    def test_limits_are_judged_over_what_is_left(self) -> None:
        found = machines.assessed(fan(*limited(3e-5, 4.0)), machines.mount(k=K, c=C))
        row = next(r for r in found.margins if r.kind == "displacement" and r.upper == 3e-5)
        assert row.note == "over the speeds that are left"
        assert 0.0 <= row.margin < 1e-6
        assert "displacement z, peak at P: " in found.barred[0].why

    def test_nothing_is_barred_where_nothing_is_exceeded(self) -> None:
        found = machines.assessed(fan(*limited(1.0, 4.0)), machines.mount(k=K, c=C))
        assert found.barred == () and found.meets

    def test_separation_is_kept_over_what_is_left(self) -> None:
        """f_n / (1 + s) to f_n / (1 - s), and the whole range where the separation cannot be had."""
        natural = math.sqrt(K / M) / TWO_PI
        brief = fan(*limited(1.0, 6.0), Separation(limit=0.2))
        found = machines.assessed(brief, machines.mount(k=K, c=C))
        (band,) = found.barred
        assert (band.low, band.high) == pytest.approx((natural / 1.2, natural / 0.8), rel=1e-8)
        assert found.separation == pytest.approx(0.2, rel=1e-7) and found.meets
        problem = build(brief, {"list": machines.catalog(machines.mount(k=K, c=C))})
        outcome = SOLVERS["enumeration"].solve(problem, Settings())
        assert outcome.objectives["separation"] == pytest.approx([0.2], rel=1e-7)

    def test_a_second_source_takes_room(self) -> None:
        """A steady force of another frequency adds its own peak at any speed: the limit left is L - F / |k - m w^2|."""
        other = machines.force(40.0, size=40.0)
        brief = fan(*limited(3e-5, 4.0))
        brief = brief.model_copy(update={"forcing": (*brief.forcing, other)})
        w = TWO_PI * 40.0
        room = 3e-5 - 40.0 / abs(K - M * w**2 + 1j * w * C)
        (band,) = machines.assessed(brief, machines.mount(k=K, c=C)).barred
        assert (band.low, band.high) == pytest.approx(edges(room), rel=1e-7)
        loud = brief.model_copy(update={"forcing": (brief.forcing[0], machines.force(40.0, size=2000.0))})
        found = machines.assessed(loud, machines.mount(k=K, c=C))
        row = next(r for r in found.margins if r.kind == "dwell-bands")
        assert (row.value, row.margin, found.meets) == (math.inf, -1.0, False)
        problem = build(loud, {"list": machines.catalog(machines.mount(k=K, c=C))})
        assert problem.dwell[0].margins(all_designs(problem.model, 0, 1)).tolist() == [[-1.0]]

    def test_two_orders_make_two_bands_or_one(self) -> None:
        """Orders 1 and 1.5, each with a force that exceeds the limit near its own resonance; brute force by numpy."""
        orders = ShaftOrders(
            name="orders", shaft="rotor", position=(0.0, 0.0, 0.0),
            orders=(Order(order=1.0, force=(0.0, 0.0, 4.0)), Order(order=1.5, force=(0.0, 0.0, 5.0))),
        )  # fmt: skip
        limit = 1e-4
        part = machines.mount(k=K, c=C)
        brief = machines.one_axis(
            M,
            orders,
            limited(limit, 4.0),
            conditions=(Condition(name="running", shafts={"rotor": (4.0, 14.0)}),),
        )
        speed = np.linspace(4.0, 14.0, 2_000_001)
        w = TWO_PI * speed
        total = sum(f / np.abs(K - M * (p * w) ** 2 + 1j * p * w * C) for p, f in ((1.0, 4.0), (1.5, 5.0)))
        above = np.flatnonzero(np.diff((total > limit).astype(int)))
        expected = speed[above]
        found = machines.assessed(brief, part)
        assert [x for band in found.barred for x in (band.low, band.high)] == pytest.approx(
            list(expected), abs=1e-5
        )
        one = machines.one_axis(M, orders, limited(limit, 6.0, bands=1), conditions=brief.conditions)
        (band,) = machines.assessed(one, part).barred
        assert (band.low, band.high) == pytest.approx((expected[0], expected[3]), abs=1e-5)

    @pytest.mark.parametrize("seed", range(3))
    def test_six_axes_by_brute_force(self, seed: int) -> None:
        """Every speed of 60,000 that exceeds the limit by numpy's solver lies in a band, and no band is too wide."""
        brief, mounts = machines.random_machine(seed, viscous=True)
        turning = brief.forcing[1]
        low, high = 6.0, 30.0
        mass, damping, stiffness = two_ways.by_hand(brief, mounts)
        speed = np.linspace(low, high, 60_001)
        (tone,) = turning.tones({"rotor": (low, high)})
        (body,), point = brief.bodies, np.array(brief.points[0].position)
        arm = np.array(tone.position) - np.array(body.centre)
        load = np.zeros(7, dtype=complex)
        load[:3], load[3:6] = tone.force, np.cross(arm, np.array(tone.force))
        w = TWO_PI * speed
        matrix = stiffness + 1j * w[:, None, None] * damping - w[:, None, None] ** 2 * mass
        q = np.linalg.solve(matrix, (w[:, None] ** 2 * load)[..., None])[..., 0]
        moved = q[:, :3] + np.cross(q[:, 3:6], point - np.array(body.centre))
        value = np.abs(w * moved[:, 2]) / math.sqrt(2.0)
        limit = float(np.quantile(value, 0.8))
        brief = brief.model_copy(
            update={
                "forcing": (turning,),
                "conditions": (Condition(name="running", shafts={"rotor": (low, high)}),),
                "allowables": (
                    Velocity(at="P", direction="z", measure="rms", limit=limit),
                    DwellBands(shaft="rotor", share=0.9),
                ),
            }
        )
        bands = machines.assessed(brief, *mounts).barred
        inside = np.zeros(len(speed), dtype=bool)
        for band in bands:
            inside |= (speed >= band.low) & (speed <= band.high)
        assert not np.any((value > limit * (1.0 + 1e-9)) & ~inside)
        assert np.sum(inside) <= np.sum(value > limit) + 2 * len(bands)
        problem = build(brief, {"list": machines.catalog(*mounts)})
        designs = all_designs(problem.model, 0, problem.count)
        own = next(
            i
            for i in range(problem.count)
            if problem.design(designs, i).parts == tuple(m.part for m in mounts)
        )
        batch = problem.dwell[0].bands(designs.take(np.array([own])))
        assert batch is not None
        assert np.array(batch) == pytest.approx(np.array([(b.low, b.high) for b in bands]), rel=1e-7)

    def test_damping_of_unknown_kind_bars_what_either_reading_exceeds(self) -> None:
        """The union of the bands of a viscous mount and of one with a loss factor, each by numpy's dense sampling."""
        part = laws.unknown(machines.mount(k=K, loss=0.15), rated=400.0)
        readings = part.damping_unknown
        assert readings is not None
        speed = np.linspace(*RANGE, 1_200_001)
        w = TWO_PI * speed
        limit = 2.4e-5
        over = np.zeros(len(speed), dtype=bool)
        widths = []
        for spring in (K + 1j * w * readings.viscous[2], K * (1 + 1j * readings.loss_factor[2])):
            beyond = ME * w**2 / np.abs(spring - M * w**2) > limit
            widths.append(speed[beyond].max() - speed[beyond].min())
            over |= beyond
        assert abs(widths[0] - widths[1]) > 0.01
        brief = fan(*limited(limit, 11.0))
        (band,) = machines.assessed(brief, part).barred
        assert (band.low, band.high) == pytest.approx((speed[over].min(), speed[over].max()), abs=2e-5)
        problem = build(brief, {"list": machines.catalog(part)})
        batch = problem.dwell[0].bands(all_designs(problem.model, 0, 1))
        assert np.array(batch) == pytest.approx(np.array([[band.low, band.high]]), rel=1e-7)

    def test_ballast_and_states_move_the_bands(self) -> None:
        """A heavier machine and a mount that is 20 % softer: the closed form with that mass and stiffness."""
        step = 30.0
        soft = Condition(name="cold", shafts={"rotor": RANGE}, state="soft")
        brief = fan(
            *limited(3e-5, 9.0),
            conditions=(soft,),
            states=(State(name="soft", stiffness_factor=0.8),),
            ballast=Ballast(
                position=(0.0, 0.0, 0.0), size=(0.1, 0.1, 0.1), steps=(0.0, step), cost_per_kg=0.1
            ),
        )
        part = machines.mount(k=K, c=C)
        speed = np.linspace(*RANGE, 1_200_001)
        above = speed[size(speed, 0.8 * K, 0.8 * C, M + step) > 3e-5]
        (band,) = machines.assessed(brief, part, ballast=step).barred
        assert (band.low, band.high) == pytest.approx((above[0], above[-1]), abs=2e-5)
        problem = build(brief, {"list": machines.catalog(part)})
        batch = problem.dwell[0].bands(all_designs(problem.model, 1, 2))
        assert np.array(batch) == pytest.approx(np.array([[band.low, band.high]]), rel=1e-7)

    def test_the_cheapest_design_whose_bands_are_narrow_enough(self) -> None:
        """Of 6 mounts the width by the closed form decides; enumeration and bounded search find the same."""
        limit, allowed = 3e-5, 2.0
        parts = [
            machines.mount(f"m{i}", k, c=c, cost=cost)
            for i, (k, c, cost) in enumerate(
                [(4e5, 500.0, 3.0), (4e5, 1500.0, 7.0), (2.4e6, 500.0, 9.0), (1e5, 300.0, 5.0), (6e5, 800.0, 4.0),
                 (3e5, 3000.0, 6.0)]
            )
        ]  # fmt: skip
        speed = np.linspace(*RANGE, 400_001)
        step = speed[1] - speed[0]
        widths = {
            p.part: step * np.sum(size(speed, p.stiffness_dynamic[2], p.viscous[2]) > limit) for p in parts
        }
        good = {p.cost: p.part for p in parts if widths[p.part] <= allowed}
        assert 0 < len(good) < len(parts)
        brief = fan(*limited(limit, allowed), objectives=Objectives(trade=("cost", "separation")))
        problem = build(brief, {"list": machines.catalog(*parts)})
        for solver in SOLVERS.values():
            assert solver.refusal(problem) is None
            front = assessed_front(problem, solver.solve(problem, Settings()))
            assert front.points[0].design.parts == (good[min(good)],)
            assert not front.withdrawn
        met = SOLVERS["enumeration"].solve(problem, Settings()).designs
        assert {problem.design(met, i).parts[0] for i in range(met.count)} == set(good.values())


@pytest.mark.parametrize(
    "brief, key, words",
    [
        (fan(*limited(1e-5, 13.0)), ("allowable", 2, "width"), "less than the whole range, 720 rev/min"),
        (
            fan(limited(1e-5, 1.0)[0], DwellBands(shaft="pump", width=1.0)),
            ("allowable", 2, "shaft"),
            "a shaft of",
        ),
        (
            fan(*limited(1e-5, 1.0), barred={"rotor": ((8.0, 9.0),)}),
            ("allowable", 2),
            'either "barred" speeds',
        ),
        (
            fan(*limited(1e-5, 1.0), Transmissibility(of="force", direction="z", limit=1.0)),
            ("allowable", 2),
            "limits on responses at one speed",
        ),
        (
            fan(*limited(1e-5, 1.0), objectives=Objectives(trade=("cost", "least-margin"))),
            ("objectives", "trade"),
            'objectives without "least-margin"',
        ),
        (fan(barred={"rotor": ((5.0, 19.0),)}), ("condition", 0, "barred", "rotor"), "bands that leave some"),
        (
            fan(barred={"rotor": ((8.0, 9.0), (19.0, 20.0))}),
            ("condition", 0, "barred", "rotor", 1),
            "a band within the range of rotor, 360 to 1080 rev/min",
        ),
    ],
)
def test_what_is_refused(brief: Brief, key: tuple[Any, ...], words: str) -> None:
    (fault,) = cross_check(brief)
    assert fault.path == key and words in fault.expected


BARRED = {"rotor": [["480 rpm", "560 rpm"]]}


def fan_study(*more: str, **condition: Any) -> str:
    """A fan on one mount from 360 to 1080 rev/min; `condition`: further keys of the condition it runs in."""
    shafts = {"rotor": ["360 rpm", "1080 rpm"]}
    return small.study_text(
        "A fan",
        small.mass_on_mounts("120 kg", stations={"S": 0.0}),
        small.table("condition", name="running", shafts=shafts, **condition),
        small.table(
            "forcing",
            kind="rotating-unbalance",
            name="u",
            shaft="rotor",
            position=small.place(),
            axis="x",
            unbalance="2000 g mm",
        ),
        small.limit("displacement", "0.03 mm", conditions=["running"]),
        *more,
        small.parts_from("mounts"),
    )


def test_a_study_file_is_taken_apart(tmp_path: Path) -> None:
    study = tmp_path / "study.toml"
    study.write_text(fan_study(barred=BARRED), encoding="utf-8")
    brief = read_brief(study)
    names = ("running, rotor 360 to 480 rev/min", "running, rotor 560 to 1080 rev/min")
    assert tuple(c.name for c in brief.conditions) == names
    assert brief.allowables[0].conditions == names
    assert brief.conditions[0].whole.name == "running"


@pytest.mark.parametrize(
    "old, new, where, words",
    [
        ('"560 rpm"', '"470 rpm"', "condition[1].barred", "the lower end first"),
        ('"480 rpm"', '"480"', "condition[1].barred.rotor[1][1]", "unit"),
        ("barred = { rotor", "barred = { pump", "condition[1].barred", "a shaft of this condition: rotor"),
        ("barred", "steady = false\nbarred", "condition[1].barred", "in a steady condition alone"),
        ("barred", "bared", "condition[1].bared", "one of the keys"),
    ],
)
def test_faults_of_a_study_file(tmp_path: Path, old: str, new: str, where: str, words: str) -> None:
    text = fan_study(barred=BARRED).replace(old, new)
    study = tmp_path / "study.toml"
    study.write_text(text, encoding="utf-8")
    (fault,) = scan_brief(study).faults
    assert fault.where == where and words in fault.expected
    assert text.splitlines()[(fault.line or 0) - 1].startswith(("barred = {", "bared = {"))


@pytest.mark.parametrize(
    "text, where, words",
    [
        ('width = "2 Hz"\nshare = "10 %"', "allowable[2]", 'either "width"'),
        ("", "allowable[2]", 'either "width"'),
        ('share = "120 %"', "allowable[2].share", "a share above 0 and below 100 %"),
        ('width = "2 Hz"\nbands = 0', "allowable[2].bands", "a whole number of bands"),
        ('width = "2"', "allowable[2].width", "unit"),
    ],
)
def test_faults_of_the_limit(tmp_path: Path, text: str, where: str, words: str) -> None:
    study = tmp_path / "study.toml"
    bands = small.table("allowable", kind="dwell-bands", shaft="rotor").rstrip() + f"\n{text}\n\n"
    study.write_text(fan_study(bands), encoding="utf-8")
    (fault,) = scan_brief(study).faults
    assert fault.where == where and words in fault.expected


def test_the_whole_road(tmp_path: Path) -> None:
    """A study file with a limit on the barred width, run, assessed and reported; the width by the closed form."""
    start = {"rotor": ["60 rpm", "1080 rpm"]}
    text = fan_study(
        small.table("condition", name="start", steady=False, shafts=start, run_up={"rotor": "8 s"}),
        small.table("allowable", kind="dwell-bands", shaft="rotor", conditions=["running"], width="260 rpm"),
    )
    mounts = small.mount_list(
        "ash,spring,400,400,500,0,9000,yes,10,5",
        "elm,spring,400,400,3000,0,9000,yes,10,9",
        columns=small.MOUNT_COLUMNS.replace("loss_factor", "viscous [N s/m]"),
    )
    small.written(tmp_path, text, mounts=mounts)
    result = run_study(load_study(tmp_path / "study.toml"), Settings())
    low, high = edges(3e-5)
    assert high - low > 260.0 * RPM
    assert result.answer is not None and result.answer.design.parts == ("elm",)
    found = {s.name: s for s in sections(result, {})}["dwell"]
    assert found.heading == "Speeds not to dwell at"
    assert 'passing through them is judged in condition "start"' in found.texts[0]
    (table,) = found.tables
    (band,) = result.answer.barred
    assert table.rows[0][:2] == ("running", "rotor")
    assert float(table.rows[0][2]) <= 60.0 * band.low and 60.0 * band.high <= float(table.rows[0][3])
    assert float(table.rows[0][3]) - float(table.rows[0][2]) == pytest.approx(
        60.0 * (band.high - band.low), abs=0.2
    )
    assert table.rows[1][5].endswith("260 rev/min may be barred")
    speed = np.linspace(*RANGE, 400_001)
    above = speed[size(speed, K, 3000.0) > 3e-5]
    assert (band.low, band.high) == pytest.approx((above[0], above[-1]), abs=1e-4)


@pytest.mark.parametrize(
    "seed", [2, 7, 16, *(pytest.param(s, marks=pytest.mark.nightly) for s in range(20, 50))]
)
def test_random_machines_both_ways_and_by_dense_sampling(seed: int) -> None:
    """Up to three orders, two limits, loss factors down to 1e-4: the same bands, and no sampled speed missed."""
    random = np.random.default_rng(seed + 100)
    brief, mounts = machines.random_machine(seed, flexible_floor=bool(seed % 2))
    loss = float(10 ** random.uniform(-4, -1))
    mounts = tuple(replace(mount, loss_factor=(loss,) * 3) for mount in mounts)
    orders = ShaftOrders(
        name="orders",
        shaft="rotor",
        position=(0.1, 0.0, 0.2),
        orders=tuple(
            Order(order=p, force=tuple(float(f) for f in random.normal(0, 20, 3)))
            for p in (1.0, 2.0, 0.5)[: 1 + seed % 3]
        ),
    )
    limits = (
        Velocity(
            at="P",
            direction="resultant",
            measure="rms" if seed % 2 else "peak",
            limit=float(10 ** random.uniform(-1.8, 0.0)),
        ),
        Acceleration(at="P", direction="x", measure="peak", limit=float(10 ** random.uniform(0.5, 3))),
    )
    brief = brief.model_copy(
        update={
            "forcing": (brief.forcing[1], orders),
            "conditions": (Condition(name="running", shafts={"rotor": (5.0, 40.0)}),),
            "allowables": (*limits, DwellBands(shaft="rotor", share=0.9, bands=None if seed % 4 else 3)),
        }
    )
    problem = build(brief, {"list": machines.catalog(*mounts)})
    designs = all_designs(problem.model, 0, problem.count)
    parts = tuple(mount.part for mount in mounts)
    own = next(i for i in range(problem.count) if problem.design(designs, i).parts == parts)
    batch = problem.dwell[0].bands(designs.take(np.array([own])))
    found = machines.assessed(brief, *mounts)
    bands = [(band.low, band.high) for band in found.barred]
    assert np.array(batch).reshape(-1, 2) == pytest.approx(np.array(bands).reshape(-1, 2), rel=1e-7)
    assert all(row.margin >= 0.0 for row in found.margins if "are left" in row.note)
    speed = np.linspace(5.0, 40.0, 20_001)
    sets = coherent_sets(tones_of(brief, brief.conditions[0]))
    machine = DirectMachine(brief, Design(brief.groups, mounts, 0.0))
    values = amplitudes_at(machine, tuple((limit, "P") for limit in limits), sets, speed)
    over = np.any(values > np.array([[limit.limit * (1.0 + 1e-9)] for limit in limits]), axis=0)
    inside = np.any([(speed >= a) & (speed <= b) for a, b in bands] or [np.zeros(len(speed), bool)], axis=0)
    assert not np.any(over & ~inside)
