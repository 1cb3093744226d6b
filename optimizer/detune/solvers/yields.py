"""Yield: the share of machines that meet the brief when parts, machine and forcing scatter by a distribution.

Points come from a scrambled Sobol sequence (scipy.stats.qmc). Every requirement the bounds know is evaluated exactly
at a grid of speeds with the natural frequencies in it and a parabola through the greatest samples, noise by quadrature
to 1e-4, the others by the assessor at each sample. The interval of confidence is that of Clopper and Pearson
(Biometrika 26, 1934) for independent trials, which is on the safe side for a Sobol sequence as a rule, not by proof.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.separation import Separation
from detune.brief.allowable.stability import Stability
from detune.problem.build import Problem
from detune.problem.requirement import Requirement
from detune.proof.noise_values import noise_values_at
from detune.proof.scatter_data import LimitedRows, ScatterSystem, values_at
from detune.proof.static_rows import static_values_at
from detune.response.assess import assess
from detune.solvers.certify_statics import StaticRow, modes_at, stability_worst
from detune.solvers.design_rows import NOT_KNOWN, DesignRows, ResponseGroup, StaticGroup
from detune.solvers.perturbed import perturbed
from detune.solvers.scatter_machine import ScatterMap

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]
SEED = 20_011
GRID = 65
NEAR = (0.985, 1.0, 1.015)
SLOW_SAMPLES = 128
SIGMAS = 3.0


@dataclass(frozen=True)
class Yield:
    """Yield of a design: met of `samples`, and the interval [low, high] at `confidence`.

    missed: requirement in words and in how many samples it was not met, most first. slow: whether the assessor had
    to judge samples one by one, which limits their number.
    """

    met: int
    samples: int
    low: float
    high: float
    confidence: float
    distribution: str
    missed: tuple[tuple[str, int], ...]
    slow: bool

    @property
    def share(self) -> float:
        """The estimate: met over samples."""
        return self.met / self.samples


def clopper_pearson(met: int, samples: int, confidence: float) -> tuple[float, float]:
    """Interval of a binomial share; Clopper and Pearson 1934, by the quantiles of the beta distribution."""
    from scipy.stats import beta

    tail = 0.5 * (1.0 - confidence)
    low = 0.0 if met == 0 else float(beta.ppf(tail, met, samples - met + 1))
    high = 1.0 if met == samples else float(beta.ppf(1.0 - tail, met + 1, samples - met))
    return low, high


def sample_points(found: ScatterMap, distribution: str, count: int) -> tuple[Floats, Floats]:
    """Points (N, V) of a design's scatter and factors (N,) of the forcing, from one Sobol sequence.

    lognormal: ln of every factor is normal, the interval's ends at three standard deviations (mass and centre:
    normal); each end sets its own side.
    """
    from scipy.stats import norm, qmc

    variables = len(found.variables)
    power = int(np.ceil(np.log2(count)))
    unit = qmc.Sobol(variables + 1, scramble=True, seed=SEED).random_base2(power)[:count]
    low = np.append(found.low, 1.0 + found.forcing[0])
    high = np.append(found.high, 1.0 + found.forcing[1])
    if distribution == "uniform":
        points = low + (high - low) * unit
    else:
        middle = np.append(found.nominal, 1.0)
        sigma = norm.ppf(np.clip(unit, 1e-12, 1.0 - 1e-12)) / SIGMAS
        plain = middle == 0.0
        with np.errstate(divide="ignore", invalid="ignore"):
            below, above = np.log(low / middle), np.log(high / middle)
            factors = middle * np.exp(np.where(sigma < 0.0, -sigma * below, sigma * above))
        points = np.where(plain, np.where(sigma < 0.0, -sigma * low, sigma * high), factors)
    return np.asarray(points[:, :-1]), np.asarray(points[:, -1])


def design_yield(problem: Problem, part: NDArray[np.intp], step: int) -> Yield:
    """Return the yield of a design under the scatter of the problem's brief."""
    scatter = problem.brief.scatter
    assert scatter is not None and scatter.distribution is not None
    rows = DesignRows(problem, part, step)
    statics, separations, responses = rows.statics(), rows.separations(), rows.responses()
    for group in statics:
        rows.unknown += [(requirement, "judged sample by sample") for requirement in _unstable(rows, group)]
    rows.unknown += [(requirement, NOT_KNOWN) for requirement in rows.unasked()]
    count = min(scatter.sample_count, SLOW_SAMPLES) if rows.unknown else scatter.sample_count
    points, forcing = sample_points(rows.map, scatter.distribution, count)
    missed: dict[str, Flags] = {}

    def note(label: str, broken: Flags) -> None:
        missed[label] = missed.get(label, np.zeros(count, dtype=bool)) | broken

    for group in statics:
        if group.rows:
            limits = rows.limits(group.each, group.rows)
            values = static_values_at(limits, points)
            for index, requirement in enumerate(group.owner):
                kept = (values[:, index] >= limits.lower[index]) & (values[:, index] <= limits.upper[index])
                note(requirement.label, ~kept)
    for requirement, each, system in separations:
        least = np.array([_separation(system, point, each.intervals) for point in points])
        assert isinstance(requirement.allowable, Separation)
        note(requirement.label, ~(least >= requirement.allowable.limit))
    for found in responses:
        total = _response_values(found, points, forcing)
        adds, limit = rows.static_parts(found, points)
        for index, requirement in enumerate(found.requirements):
            note(requirement.label, ~(total[:, index] + adds[:, index] <= limit[:, index]))
    if rows.unknown:
        wanted = {
            (r.allowable.kind, r.condition, r.place, r.allowable.quantity()): r.label for r, _ in rows.unknown
        }
        for number, point in enumerate(points):
            brief, design = perturbed(problem.brief, rows.design, rows.map, tuple(point.tolist()))
            for row in assess(brief, design).margins:
                label = wanted.get((row.kind, row.condition, row.place, row.quantity))
                if label is not None and not _met(row.value, row.margin, row.upper, float(forcing[number])):
                    note(label, np.arange(count) == number)
    broken = np.zeros(count, dtype=bool)
    for flags in missed.values():
        broken |= flags
    met = int(count - broken.sum())
    low, high = clopper_pearson(met, count, scatter.confidence)
    ranked = sorted(
        ((label, int(flags.sum())) for label, flags in missed.items() if flags.any()), key=lambda m: -m[1]
    )
    return Yield(
        met, count, low, high, scatter.confidence, scatter.distribution, tuple(ranked), bool(rows.unknown)
    )


def _response_values(found: ResponseGroup, points: Floats, forcing: Floats) -> Floats:
    """Values (N, R) of response rows at points (N, V), all families and the noise together."""
    count, ones = len(points), np.ones(len(found.requirements))
    total = np.zeros((count, len(ones)))
    for limited in found.families(ones, 1.0):
        value = _suprema(found.system, limited, points)
        value = value if found.largest else value * forcing[:, None]
        both = np.where(limited.squares, np.hypot(total, value), total + value)
        total = np.maximum(total, value) if found.largest else both
    noise = found.noise(ones, 1.0)
    if noise is None:
        return total
    value = noise_values_at(found.system, noise, points) * forcing[:, None]
    squares = np.array([row.squares for row in found.observed])
    return np.asarray(np.where(squares, np.hypot(total, value), total + value))


def _unstable(rows: DesignRows, group: StaticGroup) -> list[Requirement]:
    """Stability requirements that are not far beyond doubt: those not met with twofold reserve at the
    interval's ends.
    """
    out = []
    nothing = StaticRow(np.zeros((3, group.each.model.frame.count)))
    for requirement in group.stability:
        assert isinstance(requirement.allowable, Stability)
        limits = rows.limits(group.each, [nothing])
        _, worst = stability_worst(rows.problem.brief, group.each, limits, rows.designs, rows.map)
        if worst < 2.0 * requirement.allowable.limit:
            out.append(requirement)
    return out


def _met(value: float, margin: float, upper: float | None, forcing: float) -> bool:
    if upper is None:
        return margin >= 0.0
    return value * max(forcing, 1.0) <= upper


def _separation(system: ScatterSystem, point: Floats, intervals: tuple[tuple[float, float], ...]) -> float:
    frequency = modes_at(system, point)
    return min(
        (float(np.maximum(frequency / high - 1.0, 1.0 - frequency / low).min()) for low, high in intervals),
        default=np.inf,
    )


def _suprema(system: ScatterSystem, limits: LimitedRows, points: Floats) -> Floats:
    """Greatest values (N, R) over the speeds: a grid, the undamped modes and beside them, and a parabola."""
    low, high = limits.speed
    if high <= low:
        return _at(system, limits, points, np.full((len(points), 1), low))[:, 0]
    grid = np.broadcast_to(np.linspace(low, high, GRID), (len(points), GRID))
    orders = sorted({each.order for each in limits.sets})
    modes = np.array([modes_at(system, point) for point in points])
    near = np.concatenate([np.clip(modes * w / order, low, high) for order in orders for w in NEAR], axis=1)
    speeds = np.sort(np.concatenate([grid, near], axis=1), axis=1)
    values = _at(system, limits, points, speeds)
    # A parabola through the greatest sample and its neighbours stands for the peak between them.
    at = np.clip(values.argmax(axis=1), 1, speeds.shape[1] - 2)
    rows, columns = np.arange(len(points))[:, None], np.arange(limits.count)
    x = [speeds[rows, at + k] for k in (-1, 0, 1)]
    y = [values[rows, at + k, columns] for k in (-1, 0, 1)]
    with np.errstate(divide="ignore", invalid="ignore"):
        first, second = (y[1] - y[0]) / (x[1] - x[0]), (y[2] - y[1]) / (x[2] - x[1])
        bend = (second - first) / (x[2] - x[0])
        slope = first + bend * (x[1] - x[0])
        top = y[1] - slope**2 / (4.0 * bend)
    good = np.isfinite(top) & (bend < 0.0) & (top < 1.1 * y[1])
    return np.asarray(np.maximum(values.max(axis=1), np.where(good, top, -np.inf)))


def _at(system: ScatterSystem, limits: LimitedRows, points: Floats, speeds: Floats) -> Floats:
    """Values (N, F, R) at speeds (N, F) in Hz of every point."""
    count, number = speeds.shape
    out = np.empty((count * number, limits.count))
    squares = (2.0 * np.pi * speeds) ** 2
    every = np.concatenate([np.repeat(points, number, axis=0), squares.reshape(-1, 1)], axis=1)
    for first in range(0, len(every), 8192):
        out[first : first + 8192] = values_at(system, limits, every[first : first + 8192])
    return out.reshape(count, number, -1)


__all__ = ["Yield", "clopper_pearson", "design_yield", "sample_points"]
