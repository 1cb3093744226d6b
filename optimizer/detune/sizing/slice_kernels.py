"""Slices of one problem: its scaled question, the lines in use, and the rules that solve them, interpreted or compiled.

The rules are one text (`slice_response`, `slice_envelope`, `slice_exchange`). Compiling takes half a minute once and
loading the compiled form a second, so a program that solves a few slices interprets them.
"""

from __future__ import annotations

import functools
import math
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Literal

from detune.ground import compiled
from detune.sizing import slice_exchange
from detune.sizing.slice_data import (
    CLOSED,
    HIGH,
    KIND,
    LAST,
    LINE,
    LINEAR,
    LOW,
    OPEN,
    SEPARATION,
    TRANSMISSIBILITY,
    Bench,
    Question,
    Room,
    bench,
    pool,
)
from detune.sizing.statement import (
    STANDARD_GRAVITY,
    DampingKind,
    OneAxisProblem,
    PowerForm,
    excitations,
    power_form,
)

Form = Literal["auto", "plain", "compiled"]
# Interpreted slices (2 ms each) of this process after which compiling, or loading what was compiled before, pays.
WORTH_COMPILING, WORTH_LOADING = 20_000, 500
SEEDS = 7
HEADER = '''"""Generated rules of one-axis sizing; safe to delete."""
from __future__ import annotations

import math

from numba import njit

from detune.sizing.slice_data import *
from detune.sizing.slice_envelope import SAME_ROOT
from detune.sizing.slice_exchange import CELLS, ROUNDS, TOUCH
from detune.sizing.slice_response import EPSILON, VIOLATION

'''
_solved = [0]
_marked: list[bool] = []


@functools.cache
def _text() -> tuple[str, Path]:
    """The compiled module's text and file."""
    here = Path(__file__).parent
    names = ("slice_response.py", "slice_envelope.py", "slice_exchange.py")
    texts = [(here / name).read_text(encoding="utf-8") for name in names]
    text = HEADER + compiled.decorated(texts, '@njit(cache=True, error_model="numpy")')
    return text, compiled.module_file("detune_slices", text)


def rules(form: Form) -> tuple[Any, bool]:
    """The module with `solve`, `bound` and `region`, and whether it is the compiled one."""
    if form == "plain":
        return slice_exchange, False
    text, path = _text()
    if form == "auto" and _solved[0] < (WORTH_LOADING if compiled.is_ready(path) else WORTH_COMPILING):
        return slice_exchange, False
    return compiled.load(path, text), True


def is_closed(form: PowerForm, kind: DampingKind) -> bool:
    """Whether the lines at both ends of a range and `closed_envelope` together say all that the range says.

    True for the forms listed there; for A^2 u^2 with A >= m, where the bound rises with u throughout; and for a
    constant T <= 1, which binds at the lower end: (T^2 (k - m u)^2 - k^2)/(u (1 - T^2)) rises with u.
    """
    if form.transmission:
        return form.power == 0
    return form.power in ((0, 1, 2) if kind == "loss factor" else (1, 2))


@dataclass(frozen=True)
class Scales:
    """Reference stiffness (N/m) and squared frequency (rad2/s2) that make the algebra dimensionless."""

    stiffness: float
    squared_frequency: float

    @classmethod
    def of(cls, problem: OneAxisProblem) -> Scales:
        """Reference values near the middle of the problem's own stiffness bounds."""
        low, high = problem.stiffness_bounds
        stiffness = math.sqrt(low * high)
        return cls(stiffness, stiffness / problem.mass)

    @property
    def mass(self) -> float:
        """Reference mass in kg."""
        return self.stiffness / self.squared_frequency

    @property
    def to_u(self) -> float:
        """Factor from a squared frequency in Hz2 to u, and to stiffness per mass."""
        return (2.0 * math.pi) ** 2 / self.squared_frequency


@dataclass(frozen=True)
class Segment:
    """One disjoint interval of stiffness (N/m) at one mass, with its best design: damping in N s/m or loss factor."""

    left: float
    right: float
    stiffness: float
    damping: float
    value: float


@dataclass(frozen=True)
class SliceAnswer:
    """Segments of one slice; the largest excess of (response/limit)^2 - 1 at a best point; the gap of a best value.

    `decided` is False where the search for holes inside the segments was cut short.
    """

    segments: tuple[Segment, ...]
    excess: float
    gap: float
    decided: bool


def separation_peaks(intervals: tuple[tuple[float, float], ...]) -> tuple[float, ...]:
    """Frequencies where the least separation can have an inner maximum: 2 / (1/f_b + 1/f_a) of each pair."""
    return tuple(2.0 / (1.0 / b + 1.0 / a) for _, b in intervals for a, _ in intervals if a > b)


def question_of(problem: OneAxisProblem, scales: Scales, arrays: bool) -> Question:
    """The scaled question, of numpy arrays for compiled code or of lists for interpreted code."""
    import numpy as np

    def table(values: list[list[float]], columns: int) -> Any:
        return np.array(values, dtype=float).reshape(-1, columns) if arrays else values

    to_u = scales.to_u
    limits = []
    for limit in problem.limits:
        form = power_form(limit)
        factor = scales.squared_frequency**form.power
        if not form.transmission:
            factor /= scales.squared_frequency**2 if form.mass_proportional else scales.stiffness**2
        closed = CLOSED if is_closed(form, problem.damping_kind) else OPEN
        limits.append(
            [
                float(form.transmission),
                float(form.power),
                form.scale * factor,
                0.0 if form.transmission or form.mass_proportional else 1.0,
                limit.lower_frequency**2 * to_u,
                limit.upper_frequency**2 * to_u,
                float(LINE if limit.lower_frequency == limit.upper_frequency else closed),
            ]
        )
    forbidden: list[list[float]] = []
    if problem.separation is not None:
        away = problem.separation
        forbidden = [
            [to_u * (a * (1.0 - away)) ** 2, to_u * (b * (1.0 + away)) ** 2]
            for a, b in problem.excitation_intervals
        ]
    goal = {"least transmissibility": TRANSMISSIBILITY, "greatest separation": SEPARATION}
    frequency = problem.objective.frequency or 0.0
    peaks = [f * f * to_u for f in separation_peaks(problem.excitation_intervals)]
    return Question(
        viscous=1 if problem.damping_kind == "viscous" else 0,
        limits=table(limits, 7),
        forbidden=table(forbidden, 2),
        excited=table([[a * a * to_u, b * b * to_u] for a, b in problem.excitation_intervals], 2),
        peaks=np.array(peaks, dtype=float) if arrays else peaks,
        goal=goal.get(problem.objective.goal, LINEAR),
        goal_u=frequency**2 * to_u,
    )


def seeds(question: Question) -> list[tuple[int, float]]:
    """The lines a pool starts with: every line, the ends of a closed range, and a few places of any other."""
    found: list[tuple[int, float]] = []
    for i, limit in enumerate(question.limits):
        low, high, kind = float(limit[LOW]), float(limit[HIGH]), int(limit[KIND])
        if kind == LINE:
            found.append((i, low))
        elif kind == CLOSED:
            found += [(i, low), (i, high)]
        else:
            step = (high / low) ** (1.0 / (SEEDS - 1))
            found += [(i, low * step**n) for n in range(SEEDS - 1)] + [(i, high)]
    return found


@dataclass
class Slices:
    """Slices of one problem at any mass. The pool of lines grows only by valid lines, so all of them share it."""

    problem: OneAxisProblem
    form: Form = "auto"
    scales: Scales = field(init=False)
    count: int = field(init=False)
    question: Question = field(init=False)
    bench: Bench = field(init=False)
    excitations: tuple[tuple[float, float], ...] = field(init=False)
    cuts_used: int = 0

    def __post_init__(self) -> None:
        self.scales = Scales.of(self.problem)
        self.excitations = excitations(self.problem)
        self._rules, arrays = rules(self.form)
        self._arrays = arrays
        self.question = question_of(self.problem, self.scales, arrays)
        first = seeds(self.question)
        self.bench = bench(pool(2 * len(first) + 24, arrays), len(self.problem.limits), arrays)
        for n, (i, u) in enumerate(first):
            self.bench.pool[n][0], self.bench.pool[n][1] = i, u
        self.count = len(first)

    def _weights(self) -> tuple[float, float, float, float]:
        """(stiffness, damping, damping squared, mass) in SI: what is minimised."""
        objective = self.problem.objective
        if objective.goal == "softest":
            return 1.0, 0.0, 0.0, 0.0
        if objective.goal == "stiffest":
            return -1.0, 0.0, 0.0, 0.0
        if objective.goal == "least damping":
            return 0.0, 1.0, 0.0, 0.0
        if objective.goal == "least added mass":
            return 0.0, 0.0, 0.0, 1.0
        if objective.goal != "weighted sum":
            return 0.0, 0.0, 0.0, 0.0
        return (
            objective.stiffness_weight,
            objective.damping_weight,
            objective.damping_squared_weight,
            objective.mass_weight,
        )

    def room(self, low: float, high: float, place: tuple[float, float] = (0.0, math.inf)) -> Room:
        """The slice at one mass (kg, low = high), or relaxed over all masses in [low, high].

        Per unit of mass every limit is loosest at the heaviest mass (or does not know it), and the bounds and the
        weights are taken at the end that serves: a superset, and a bound from below on the goal. `place` is a
        window of stiffness per mass in scaled units.
        """
        problem, scales = self.problem, self.scales
        unit = scales.squared_frequency
        left = max(place[0], problem.stiffness_bounds[0] / (high * unit))
        right = min(place[1], problem.stiffness_bounds[1] / (low * unit))
        if problem.sag is not None:
            rate = STANDARD_GRAVITY * problem.sag.dynamic_to_static / unit
            left = max(left, rate / problem.sag.most if problem.sag.most > 0.0 else math.inf)
            right = min(right, rate / problem.sag.least if problem.sag.least > 0.0 else math.inf)
        least, most = problem.damping_bounds
        stiffness, damping, squared, weight = self._weights()
        if problem.damping_kind == "viscous":
            root = math.sqrt(unit)
            least, most = least / (high * root), most / (low * root)
            damping *= root * low
            squared *= unit * low * low
        return Room(
            mass=high / scales.mass,
            ratio=1.0,
            left=left,
            right=right,
            least_damping=least,
            most_damping=most,
            stiffness=stiffness * unit * (low if stiffness >= 0.0 else high),
            damping=damping,
            squared=squared,
            constant=weight * ((low if weight >= 0.0 else high) - problem.mass),
        )

    def whole_room(self, low: float, high: float, place: tuple[float, float] = (0.0, math.inf)) -> Room:
        """The slice in stiffness and damping as they are, relaxed over all masses in [low, high].

        Bounds and weights stay exact and each limit is taken at the mass that serves, stiffness by stiffness.
        """
        room = self.room(high, high, place)
        weight = self._weights()[3]
        left = max(
            place[0] * low / high, self.problem.stiffness_bounds[0] / (high * self.scales.squared_frequency)
        )
        sag = self.problem.sag
        if sag is not None and sag.most > 0.0:
            rate = STANDARD_GRAVITY * sag.dynamic_to_static / self.scales.squared_frequency
            left = max(left, rate / sag.most * low / high)
        return room._replace(
            ratio=low / high,
            left=left if sag is None or sag.most > 0.0 else math.inf,
            constant=weight * ((low if weight >= 0.0 else high) - self.problem.mass),
        )

    def _grow(self) -> None:
        old = self.bench
        self.bench = bench(pool(2 * len(old.pool), self._arrays), len(self.problem.limits), self._arrays)
        for n in range(self.count):
            self.bench.pool[n][0], self.bench.pool[n][1] = old.pool[n][0], old.pool[n][1]

    def at(self, mass: float, place: tuple[float, float] = (0.0, math.inf)) -> SliceAnswer:
        """The exact slice at one mass in kg."""
        room = self.room(mass, mass, place)
        while True:
            _solved[0] += 1
            found, self.count, excess, gap, decided = self._rules.solve(
                self.question, room, self.bench, self.count
            )
            if self.count < len(self.bench.pool):
                break
            self._grow()
        if self._arrays and not _marked:
            compiled.mark_ready(_text()[1])
            _marked.append(True)
        table = self.bench.segments[:found]
        self.cuts_used = int(table[-1][LAST]) + 1 if found else 0
        unit = self.scales.squared_frequency * mass
        viscous = self.problem.damping_kind == "viscous"
        segments = []
        for left, right, k, gamma, value, *_ in table.tolist() if self._arrays else table:
            root = math.sqrt(max(gamma, 0.0))
            damping = root * mass * math.sqrt(self.scales.squared_frequency) if viscous else root / k
            segments.append(Segment(left * unit, right * unit, k * unit, damping, value))
        return SliceAnswer(tuple(segments), excess, gap, decided)

    def bound(self, low: float, high: float, place: tuple[float, float], enough: float) -> float:
        """No design with a mass in [low, high] kg has a lesser goal; infinite: there is none.

        The better of two relaxations (`room`, `whole_room`), the second only where the first is below `enough`.
        """
        _solved[0] += 1
        first = float(self._rules.bound(self.question, self.room(low, high, place), self.bench, self.count))
        if first >= enough or self.question.goal != LINEAR or low == high:
            return first
        room = self.whole_room(low, high, place)
        return max(first, float(self._rules.bound(self.question, room, self.bench, self.count)))

    def remember(self, answer: SliceAnswer) -> None:
        """Keep the lines that are tight at the best points of the slice solved last, for bounds over masses."""
        if self.count + len(answer.segments) * len(self.problem.limits) >= len(self.bench.pool):
            self._grow()
        self.count = self._rules.remember(self.question, self.bench, len(answer.segments), self.count)

    def cuts(self, mass: float, segment: Segment) -> list[float]:
        """Stiffnesses (N/m) of the slice solved last where an active limit changes, inside one of its segments."""
        unit = self.scales.squared_frequency * mass
        own = [float(x) * unit for x in self.bench.points[: self.cuts_used]]
        return [k for k in own if segment.left <= k <= segment.right]

    def damping_at(self, mass: float, stiffness: float) -> tuple[float, float, int, int]:
        """Least and greatest damping at one stiffness and mass over whole ranges, and the limits that set them.

        -1 and -2 stand for the least and the greatest damping of the bounds.
        """
        unit = self.scales.squared_frequency * mass
        low, high, below, above = self._rules.region(
            self.question, self.room(mass, mass), self.bench, self.count, stiffness / unit
        )
        viscous = self.problem.damping_kind == "viscous"
        scale = mass * math.sqrt(self.scales.squared_frequency) if viscous else unit / stiffness
        return math.sqrt(max(low, 0.0)) * scale, math.sqrt(max(high, 0.0)) * scale, int(below), int(above)

    def margins(self, mass: float, stiffness: float, damping: float) -> list[tuple[float, float]]:
        """limit/response - 1 of every limit at one design, worst over its range, and the frequency (Hz) where it is."""
        unit = self.scales.squared_frequency
        k = stiffness / (mass * unit)
        viscous = self.problem.damping_kind == "viscous"
        gamma = (damping / mass) ** 2 / unit if viscous else (damping * k) ** 2
        self._rules.judge(self.question, self.room(mass, mass), self.bench, k, gamma)
        table = self.bench.ranges[: len(self.problem.limits)]
        return [
            (
                -1.0 if ratio == math.inf else (1.0 / math.sqrt(ratio) - 1.0 if ratio > 0.0 else math.inf),
                math.sqrt(u / self.scales.to_u),
            )
            for ratio, u, *_ in (table.tolist() if self._arrays else table)
        ]
