"""From lines to whole frequency ranges: exchange of worst frequencies on one slice of fixed mass.

A range limit is the intersection of infinitely many line limits. Start from a few of its lines (a superset of
what is feasible), solve the slice exactly, find the exact worst frequency (closed form, `worst_frequency`) at
the best point and both ends of every segment, add those lines, and solve again until nothing is violated.
Where the supremum over the range is itself a parabola in k (`closed_envelope`) it stands in the table, complete,
and no exchange is needed (`is_closed`).

* Every step is a superset, so no branch is ever lost and an empty slice is proved empty.
* At the end the returned points satisfy the limit over the continuum, and because the value of a superset
  is never above the true optimum, they are the global optimum up to the stated violation.
* A hole inside a segment: a limit of receptance form, and a transmission form of constant or (loss factor)
  any ratio, is gamma >= sup_u p_u(k) with p_u affine in one and the same convex coordinate (k^2 after taking
  2 k m away for viscous damping; k after taking -k^2 away for a loss factor), so the sup is convex there and
  lies between two points below the chord of its values at them. Testing the cell ends of a segment therefore
  bounds it on the whole cell: a line is added wherever the tested sup comes near the opposite envelope. For
  viscous transmission forms whose ratio varies with frequency the same test is made, at cell ends and
  middles, but without that proof.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from detune.sizing.envelope import Rows, Segment, gamma_interval, rows, segments
from detune.sizing.slice_objective import Scales, SliceObjective
from detune.sizing.statement import STANDARD_GRAVITY, OneAxisProblem, PowerForm, power_form
from detune.sizing.worst_frequency import closed_envelope, is_closed, worst

Floats = NDArray[np.float64]

VIOLATION = 1e-11
ROUNDS = 80
SEEDS = 7


def scales_of(problem: OneAxisProblem) -> Scales:
    """Reference values near the middle of the problem's own stiffness bounds."""
    low, high = problem.stiffness_bounds
    stiffness = math.sqrt(low * high)
    return Scales(stiffness, stiffness / problem.mass)


def scaled_form(form: PowerForm, scales: Scales) -> PowerForm:
    """The power form in scaled u, k and m (`Scales`)."""
    factor = scales.squared_frequency**form.power
    if not form.transmission:
        factor /= scales.squared_frequency**2 if form.mass_proportional else scales.stiffness**2
    return PowerForm(form.transmission, form.scale * factor, form.power, form.mass_proportional)


@dataclass
class LinePool:
    """The lines in use: all line limits and, for every range, the frequencies exchanged so far.

    Grows only by valid lines, so it may be shared between slices of different mass.
    """

    problem: OneAxisProblem
    scales: Scales
    forms: list[PowerForm]
    ranges: list[tuple[float, float]]
    index: list[int] = field(default_factory=list)
    at_u: list[float] = field(default_factory=list)

    @classmethod
    def of(cls, problem: OneAxisProblem) -> LinePool:
        """The starting pool: line limits, and a few frequencies of each range."""
        scales = scales_of(problem)
        forms = [scaled_form(power_form(limit), scales) for limit in problem.limits]
        to_u = (2 * math.pi) ** 2 / scales.squared_frequency
        ranges = [(x.lower_frequency**2 * to_u, x.upper_frequency**2 * to_u) for x in problem.limits]
        pool = cls(problem, scales, forms, ranges)
        for i, (low, high) in enumerate(ranges):
            form = forms[i]
            if low == high:
                seeds = np.array([low])
            elif is_closed(form, problem.damping_kind):
                seeds = np.array([low, high])
            else:
                seeds = np.geomspace(low, high, SEEDS)
                seeds[0], seeds[-1] = low, high
            for u in seeds:
                pool.index.append(i)
                pool.at_u.append(float(u))
        return pool

    def is_range(self, i: int) -> bool:
        """Whether limit i covers more than its own line."""
        return self.ranges[i][1] > self.ranges[i][0]

    def open_ranges(self) -> list[int]:
        """Range limits that the table does not state in closed form and that need the exchange."""
        kind = self.problem.damping_kind
        return [i for i in range(len(self.forms)) if self.is_range(i) and not is_closed(self.forms[i], kind)]

    def add(self, i: int, u: float) -> bool:
        """Add a line; False when it stands in the pool already."""
        for j, v in zip(self.index, self.at_u, strict=True):
            if j == i and abs(v - u) <= 1e-14 * u:
                return False
        self.index.append(i)
        self.at_u.append(u)
        return True

    def envelopes(self, mass: float) -> list[tuple[tuple[float, float, float], float, float]]:
        """Range limits whose supremum over the range is a parabola in k, at one scaled mass."""
        kind = self.problem.damping_kind
        wide = (i for i in range(len(self.forms)) if self.is_range(i))
        found = (closed_envelope(self.forms[i], kind, mass, *self.ranges[i]) for i in wide)
        return [x for x in found if x is not None]

    def closed_ranges(self, mass: float) -> list[int]:
        """The limits behind the closed envelopes at one scaled mass, in the order of their rows."""
        kind = self.problem.damping_kind
        wide = (i for i in range(len(self.forms)) if self.is_range(i))
        return [i for i in wide if closed_envelope(self.forms[i], kind, mass, *self.ranges[i]) is not None]

    def table(self, masses: tuple[float, ...]) -> Rows:
        """All present lines, the damping bounds and (at one mass) the closed envelopes."""
        return rows(
            [self.forms[i] for i in self.index],
            np.array(self.at_u),
            self.problem.damping_kind,
            masses,
            _damping_bounds(self.problem, self.scales),
            self.envelopes(masses[0]) if len(masses) == 1 else [],
        )

    def slice(self, masses: tuple[float, ...], window: tuple[float, float]) -> tuple[list[Segment], Rows]:
        """Solve the slice of the present lines at one scaled mass, or relaxed over two (`envelope`)."""
        table = self.table(masses)
        objective = SliceObjective(self.problem, self.scales, masses[0], masses[-1])
        inner, forbidden = stiffness_window(self.problem, self.scales, masses)
        both = (max(window[0], inner[0]), min(window[1], inner[1]))
        return segments(table, both, forbidden, objective), table


def _damping_bounds(problem: OneAxisProblem, scales: Scales) -> tuple[float, float]:
    low, high = problem.damping_bounds
    if problem.damping_kind == "loss factor":
        return low, high
    unit = math.sqrt(scales.gamma(True))
    return low / unit, high / unit


def stiffness_window(
    problem: OneAxisProblem, scales: Scales, masses: tuple[float, ...]
) -> tuple[tuple[float, float], tuple[tuple[float, float], ...]]:
    """Scaled stiffness bounds with sag, and the open intervals separation forbids, at (or relaxed over) masses."""
    low, high = (x / scales.stiffness for x in problem.stiffness_bounds)
    lightest, heaviest = masses[0], masses[-1]
    if problem.sag is not None:
        # k/m = g r / sag, and scaled k over scaled m is (k/m) / squared_frequency.
        unit = STANDARD_GRAVITY * problem.sag.dynamic_to_static / scales.squared_frequency
        if problem.sag.most > 0:
            low = max(low, lightest * unit / problem.sag.most)
        else:
            low = math.inf
        if problem.sag.least > 0:
            high = min(high, heaviest * unit / problem.sag.least)
    forbidden = []
    if problem.separation is not None:
        to_u = (2 * math.pi) ** 2 / scales.squared_frequency
        for a, b in problem.excitation_intervals:
            left = heaviest * to_u * (a * (1 - problem.separation)) ** 2
            right = lightest * to_u * (b * (1 + problem.separation)) ** 2
            if left < right:
                forbidden.append((left, right))
    return (low, high), tuple(forbidden)


def _near_closing(pool: LinePool, table: Rows, segment: Segment, mass: float) -> bool:
    """Add the lines that would close (or nearly close) a segment somewhere inside; True when any was new.

    `table` holds the lines the segment was solved with.
    """
    problem = pool.problem
    k = segment.inner
    low, high = gamma_interval(table, k)
    high = np.maximum(low, high)
    added = False
    for i in pool.open_ranges():
        for gamma in (low, high):
            ratio, u = worst(pool.forms[i], problem.damping_kind, k, gamma, mass, *pool.ranges[i])
            s = u if problem.damping_kind == "viscous" else np.ones_like(u)
            form = pool.forms[i]
            level = form.scale * u ** float(form.power)
            free = 1.0 - level if form.transmission else np.ones_like(u)
            with np.errstate(divide="ignore", invalid="ignore"):
                top = level * (k**2 if form.transmission else mass**2 if form.mass_proportional else 1.0)
                needed = (top - (k - mass * u) ** 2) / (s * free)
            jump = np.where(free > 0, needed - low, high - needed)
            closing = (ratio > 1 + VIOLATION) & (jump >= 0.5 * (high - low)) & (high > low)
            if closing.any():
                share = np.where(closing, jump / np.where(high > low, high - low, 1.0), -np.inf)
                added |= pool.add(i, float(u[int(np.argmax(share))]))
    return added


def _lift(pool: LinePool, segment: Segment, mass: float) -> Segment:
    """Raise gamma at the best stiffness until every range limit that more damping helps is met there exactly."""
    kind = pool.problem.damping_kind
    k, gamma = np.array([segment.stiffness]), np.array([segment.gamma])
    for _ in range(60):
        before = gamma
        for i in pool.open_ranges():
            form = pool.forms[i]
            ratio, u = worst(form, kind, k, gamma, mass, *pool.ranges[i])
            level = form.scale * u ** float(form.power)
            free = 1.0 - level if form.transmission else np.ones_like(u)
            if ratio[0] > 1 and free[0] > 0:
                top = level * (k**2 if form.transmission else mass**2 if form.mass_proportional else 1.0)
                s = u if kind == "viscous" else np.ones_like(u)
                gamma = np.maximum(gamma, (top - (k - mass * u) ** 2) / (s * free))
        if gamma[0] <= before[0] * (1 + 1e-15):
            break
    value, gamma = SliceObjective(pool.problem, pool.scales, mass, mass).value(k, gamma, gamma)
    return replace(segment, gamma=float(gamma[0]), value=float(value[0]))


def _remember(pool: LinePool, found: list[Segment], mass: float) -> None:
    """Add the lines that are tight at the best points, for slices over an interval of masses.

    Those slices state no closed envelopes and would not see the inside of a closed range otherwise.
    """
    ballast = pool.problem.ballast
    if ballast is None or ballast.step is not None or not found:
        return
    k, gamma = np.array([s.stiffness for s in found]), np.array([s.gamma for s in found])
    for i in (i for i in range(len(pool.forms)) if pool.is_range(i)):
        ratio, u = worst(pool.forms[i], pool.problem.damping_kind, k, gamma, mass, *pool.ranges[i])
        for j in np.flatnonzero(ratio > 1 - 1e-6):
            pool.add(i, float(u[j]))


@dataclass(frozen=True)
class SliceAnswer:
    """Segments of one slice; the largest excess of (response/limit)^2 - 1 at a best point; and the gap.

    `gap` is how far a best value lies above the proven bound of its segment (0 unless rounds ran out).
    """

    segments: list[Segment]
    excess: float
    gap: float


def solve_slice(pool: LinePool, mass: float, window: tuple[float, float]) -> SliceAnswer:
    """Exact slice at one scaled mass over lines and ranges."""
    kind = pool.problem.damping_kind
    wide = pool.open_ranges()
    found: list[Segment] = []
    for _ in range(ROUNDS):
        found, table = pool.slice((mass,), window)
        if not wide or not found:
            _remember(pool, found, mass)
            return SliceAnswer(found, 0.0, 0.0)
        k = np.array([x for s in found for x in (s.stiffness, s.left, s.right)])
        gamma = np.array([x for s in found for x in (s.gamma, s.left_gamma, s.right_gamma)])
        added = False
        for i in wide:
            ratio, u = worst(pool.forms[i], kind, k, gamma, mass, *pool.ranges[i])
            for j in np.flatnonzero(ratio > 1 + VIOLATION):
                added |= pool.add(i, float(u[j]))
        for segment in found:
            added |= _near_closing(pool, table, segment, mass)
        if not added:
            break
    _remember(pool, found, mass)
    lifted = [_lift(pool, s, mass) for s in found]
    gap = max(b.value - a.value for a, b in zip(found, lifted, strict=True))
    k, gamma = np.array([s.stiffness for s in lifted]), np.array([s.gamma for s in lifted])
    excess = max(float(worst(pool.forms[i], kind, k, gamma, mass, *pool.ranges[i])[0].max()) for i in wide)
    return SliceAnswer(lifted, max(0.0, excess - 1.0), max(gap, 0.0))
