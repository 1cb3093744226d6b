"""Slices of one problem: its scaled question, the lines in use, and the rules that solve them, interpreted or compiled.

The rules are one text (`slice_response`, `slice_rows`, `slice_envelope`, `slice_holes`, `slice_exchange`). Compiling
takes half a minute once and loading the compiled form a second, so a program that solves a few slices interprets them.
"""

from __future__ import annotations

import functools
import hashlib
import math
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Literal

from detune.ground import compiled
from detune.sizing import slice_exchange
from detune.sizing.slice_data import (
    LAST,
    LINEAR,
    Bench,
    Question,
    Room,
    bench,
    pool,
)
from detune.sizing.slice_question import Scales, question_of, seeds
from detune.sizing.statement import (
    STANDARD_GRAVITY,
    OneAxisProblem,
    excitations,
)

Form = Literal["auto", "plain", "compiled"]
# Interpreted slices (2 ms each) of this process after which compiling, or loading what was compiled before, pays.
WORTH_COMPILING, WORTH_LOADING = 10_000, 300
# A pool with so many lines beyond its first ones keeps only those in use: every slice asks all of them.
MANY = 40
HEADER = '''"""Generated rules of one-axis sizing; safe to delete."""
from __future__ import annotations

import math

from numba import njit

from detune.sizing.slice_data import *
from detune.sizing.slice_envelope import SAME_ROOT
from detune.sizing.slice_exchange import MET, ROUNDS
from detune.sizing.slice_holes import CELLS, FAR, TOUCH
from detune.sizing.slice_response import EPSILON, NEITHER, VIOLATION

'''
_solved = [0]
_marked: list[bool] = []


@functools.cache
def _text() -> tuple[str, Path]:
    """The compiled module's text and file."""
    here = Path(__file__).parent
    names = ("slice_response.py", "slice_rows.py", "slice_envelope.py", "slice_holes.py", "slice_exchange.py")
    texts = [(here / name).read_text(encoding="utf-8") for name in names]
    # The constants above the marks are frozen into the compiled code: the name of its file changes with them.
    digest = hashlib.sha256("".join(texts).encode()).hexdigest()
    text = f"# {digest}\n" + HEADER + compiled.decorated(texts, '@njit(cache=True, error_model="numpy")')
    return text, compiled.module_file("detune_slices", text)


def rules(form: Form) -> tuple[Any, bool]:
    """The module with `solve`, `bound` and `region`, and whether it is the compiled one."""
    if form == "plain":
        return slice_exchange, False
    text, path = _text()
    if form == "auto" and _solved[0] < (WORTH_LOADING if compiled.is_ready(path) else WORTH_COMPILING):
        return slice_exchange, False
    return compiled.load(path, text), True


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


@dataclass
class Slices:
    """Slices of one problem at any mass. The pool of lines grows only by valid lines, so all of them share it."""

    problem: OneAxisProblem
    form: Form = "auto"
    scales: Scales = field(init=False)
    count: int = field(init=False)
    base: int = field(init=False)
    question: Question = field(init=False)
    bench: Bench = field(init=False)
    excitations: tuple[tuple[float, float], ...] = field(init=False)
    cuts_used: int = 0

    def __post_init__(self) -> None:
        self.scales = Scales.of(self.problem)
        self.excitations = excitations(self.problem)
        self._rules, self._arrays = rules(self.form)
        self.question = question_of(self.problem, self.scales, self._arrays)
        first = seeds(self.question)
        self.base = self.count = len(first)
        self._fill(2 * len(first) + 24, first)

    def _fill(self, capacity: int, lines: Any) -> None:
        """A new bench with room for so many lines, and these in its pool."""
        self.bench = bench(pool(capacity, self._arrays), len(self.problem.limits), self._arrays)
        for n in range(self.count):
            for column in range(3):
                self.bench.pool[n][column] = lines[n][column]

    def _choose_rules(self) -> None:
        """Go on with the compiled rules once so many slices have been asked that they pay."""
        if self._arrays or self.form != "auto":
            return
        self._rules, self._arrays = rules(self.form)
        if self._arrays:
            self.question = question_of(self.problem, self.scales, True)
            self._fill(len(self.bench.pool), self.bench.pool)

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
        self._fill(2 * len(self.bench.pool), self.bench.pool)

    def at(self, mass: float, place: tuple[float, float] = (0.0, math.inf)) -> SliceAnswer:
        """The exact slice at one mass in kg."""
        self._choose_rules()
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
        if self.count > 2 * self.base + MANY:
            self.count = self._rules.compress(self.question, room, self.bench, found, self.count, self.base)
        table = self.bench.segments[:found]
        self.cuts_used = int(table[-1][LAST]) + 1 if found else 0
        unit = self.scales.squared_frequency * mass
        viscous = self.problem.damping_kind == "viscous"
        segments = []
        for left, right, k, gamma, value, *_ in table.tolist() if self._arrays else table:
            if value == math.inf:
                continue
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
