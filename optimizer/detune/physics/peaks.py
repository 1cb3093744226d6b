"""Local peaks of sampled response curves: where the true peak lies and how high it can be.

Near a resonance 1/amplitude^2 is very nearly a parabola in omega (exactly one for a single mode of small
damping), so three samples give the peak. A fourth sample tells how far the parabola can be trusted, and so
does the distance to the nearest pole: a response has no detail much finer than that.
"""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass

import numpy as np

from detune.physics.array_types import BoolArray, FloatArray, IntArray

# A neighbour below 0.4 of the peak (2.3 half widths away) is too far for a parabola.
COARSE = 1.0 / 0.4**2
# So is one farther than this many distances to the nearest pole: another hump may fit between. A sample at an
# end of the interval has a neighbour on one side only and needs a closer one.
COARSE_GAP = 0.8
COARSE_GAP_AT_EDGE = 0.5
COARSE_GAP_BETWEEN = 0.3
# Most that a response rises beside a pole on the slope of another, over the sample at that pole.
SHOULDER_RISE = 3.0
CROWDED_RISE = 20.0
# Most that a sampled peak is taken to fall short of the true one while a neighbour is that far down.
COARSE_RISE = 5.0
# The same while its neighbours are only far away, per gap in distances to the nearest pole.
HIDDEN_RISE = 0.3
# A parabola through neighbours that are d1 and d2 down in 1/amplitude^2 misses at most about this times d1
# d2.
DOUBT = 0.1
SMALLEST = 1.0 / COARSE_RISE**2


@dataclass(frozen=True)
class Samples:
    """What has been evaluated of P curves of D designs.

    omega (D, F) ascending in rad/s, unused entries infinite and last; design (P,) of each curve; values (P, F),
    unused -inf; best (P,) the largest of each; poles (D, m) natural frequencies and half_widths (D, m) in rad/s.
    """

    omega: FloatArray
    design: IntArray
    values: FloatArray
    best: FloatArray
    poles: FloatArray
    half_widths: FloatArray

    def nearest_pole(self, design: IntArray | slice, place: FloatArray) -> FloatArray:
        """Distance of places (N,) or (N, P) of designs (N,) to the nearest pole of each, infinite without poles."""
        poles, half_widths = self.poles[design], self.half_widths[design]
        if place.ndim > 1:
            poles, half_widths = poles[:, None, :], half_widths[:, None, :]
        away = place[..., None] - poles
        away *= away
        away += half_widths**2
        return np.asarray(np.sqrt(away.min(axis=-1, initial=np.inf)))


@dataclass(frozen=True)
class Peaks:
    """Places where a curve may exceed its best sample, flat: the curve, and what to do about each.

    sample is the value there; rise is the true peak over the sample, at most; place is where to sample next (NaN:
    nowhere); reach is how far from place a sample serves as well. A peak can ask for two samples.
    """

    curve: IntArray
    sample: FloatArray
    rise: FloatArray
    place: FloatArray
    reach: FloatArray


@dataclass(frozen=True)
class _Bracket:
    """A peak sample (value 1, at 0) among its neighbours, flat over peaks.

    nodes (N, 5) distance in omega of two samples on either side, infinite where there is none; ordinates (N, 5)
    (peak/value)^2; pole (N,) distance to the nearest pole.
    """

    nodes: FloatArray
    ordinates: FloatArray
    pole: FloatArray


def local_peaks(samples: Samples, tolerance: float) -> Peaks:
    """Every sampled local peak, and every gap, that could exceed the best sample of its curve."""
    values = samples.values
    peak = values * COARSE_RISE >= samples.best[:, None]
    peak &= values > 0.0
    peak[:, 1:] &= values[:, 1:] > values[:, :-1]
    peak[:, :-1] &= values[:, :-1] >= values[:, 1:]
    curve, i = _where(peak)
    sample, centre = values[curve, i], samples.omega[samples.design[curve], i]
    bracket = _neighbourhood(samples, curve, i)
    before, after = np.isfinite(bracket.nodes[:, 1]), np.isfinite(bracket.nodes[:, 3])
    found = [_wide_gaps(samples, peak), _shoulders(samples, peak)]
    for chosen, judge in ((before & after, _inside), (before ^ after, _edge)):
        part = _Bracket(bracket.nodes[chosen], bracket.ordinates[chosen], bracket.pole[chosen])
        rise, places, reach = judge(part, tolerance)
        for place in places:
            found.append(Peaks(curve[chosen], sample[chosen], rise, centre[chosen] + place, reach))
    return _joined(found)


def _joined(found: list[Peaks]) -> Peaks:
    return Peaks(
        *(
            np.concatenate([getattr(part, field.name) for part in found])
            for field in dataclasses.fields(Peaks)
        )
    )


def _where(mask: BoolArray) -> tuple[IntArray, IntArray]:
    curve, i = np.divmod(np.flatnonzero(mask), mask.shape[1])
    return curve, i


def _neighbourhood(samples: Samples, curve: IntArray, i: IntArray) -> _Bracket:
    design, last = samples.design[curve], samples.omega.shape[1] - 1
    sample, centre = samples.values[curve, i], samples.omega[design, i]
    nodes = np.zeros((curve.size, 5))
    ordinates = np.ones((curve.size, 5))
    for column, step in enumerate((-2, -1, 0, 1, 2)):
        index = np.clip(i + step, 0, last)
        place = samples.omega[design, index]
        exists = (index == i + step) & np.isfinite(place)
        nodes[:, column] = np.where(exists, np.where(exists, place, 0.0) - centre, np.inf * (step or 1))
        # A zero of the response (an anti-resonance) is only far down, not infinitely far.
        value = np.maximum(np.where(exists, samples.values[curve, index], sample), 1e-8 * sample)
        ordinates[:, column] = (sample / value) ** 2
    return _Bracket(nodes, ordinates, samples.nearest_pole(design, centre))


def _wide_gaps(samples: Samples, peak: BoolArray) -> Peaks:
    """Gaps between two high samples, no peak among them, wide enough to hide a hump: sampled half way."""
    used = np.isfinite(samples.omega[:, 1:])
    low, high = samples.omega[:, :-1], np.where(used, samples.omega[:, 1:], 0.0)
    middle, gap = np.where(used, 0.5 * (low + high), 0.0), np.where(used, high - low, 0.0)
    width = gap / samples.nearest_pole(slice(None), middle)
    rise = np.where(width > COARSE_GAP_BETWEEN, 1.0 + HIDDEN_RISE * width * np.minimum(width, 1.0), 0.5)
    positive = np.maximum(samples.values, 0.0)
    product = positive[:, 1:] * positive[:, :-1]
    wanted = product * ((2.0 * rise - 1.0) ** 2)[samples.design] > samples.best[:, None] ** 2
    curve, i = _where(wanted & ~peak[:, 1:] & ~peak[:, :-1])
    design = samples.design[curve]
    sample = np.sqrt(product[curve, i])
    return Peaks(curve, sample, rise[design, i], middle[design, i], 0.1 * gap[design, i])


def _shoulders(samples: Samples, peak: BoolArray) -> Peaks:
    """Samples at a pole that are no peak: two close poles can make a hump on the falling side.

    Where poles crowd, two may all but cancel at their own frequencies and stand high beside them.
    """
    used = np.isfinite(samples.omega)
    place = np.where(used, samples.omega, 0.0)
    pole = samples.nearest_pole(slice(None), place)
    beside = np.abs(place[..., None] - samples.poles[:, None, :])
    at_pole = used & (beside.min(axis=2, initial=np.inf) < 0.2 * pole)
    crowded = np.sum(beside < 2.0 * samples.half_widths[:, None, :], axis=2) > 1
    most = np.where(crowded, CROWDED_RISE, SHOULDER_RISE)
    gap = np.where(used[:, 1:], np.diff(place, axis=1), 0.0)
    values = samples.values
    high = (most[samples.design] * values > samples.best[:, None]) & ~peak
    found = []
    for side in (1, -1):
        here, there = (slice(None, -1), slice(1, None))[::side]
        candidate = (at_pole[:, here] & (gap > COARSE_GAP * pole[:, here]))[samples.design]
        curve, i = _where(candidate & high[:, here] & (values[:, here] > values[:, there]))
        i = i + (side < 0)
        design = samples.design[curve]
        step = 0.9 * COARSE_GAP * pole[design, i]
        rise = 0.5 * (1.0 + most[design, i])
        found.append(Peaks(curve, values[curve, i], rise, place[design, i] + side * step, 0.1 * step))
    return _joined(found)


def _inside(bracket: _Bracket, tolerance: float) -> tuple[FloatArray, list[FloatArray], FloatArray]:
    """Peaks with a neighbour on both sides: (rise, places from the peak sample, reach)."""
    left, right = -bracket.nodes[:, 1], bracket.nodes[:, 3]
    y_left, y_right = bracket.ordinates[:, 1], bracket.ordinates[:, 3]
    vertex, lowest, trust, bend = _parabola(bracket)
    rise = 1.0 / np.sqrt(lowest) + DOUBT * (y_left - 1.0) * (y_right - 1.0)
    place = _step(vertex, left, right)
    reach = np.maximum(np.sqrt(0.5 * tolerance * lowest / bend), 0.3 * trust)
    reach = np.minimum(reach, 0.3 * np.abs(place))
    coarse_left = (y_left > COARSE) | (left > COARSE_GAP * bracket.pole)
    coarse_right = (y_right > COARSE) | (right > COARSE_GAP * bracket.pole)
    coarse = coarse_left | coarse_right
    # Too far for a parabola: 1/amplitude is a V with its foot about one half width from the peak sample.
    foot = np.minimum(_foot(left, y_left), _foot(right, y_right))
    limit = 0.9 * COARSE_GAP * bracket.pole
    to_left = _stride(foot, limit, left, np.where(coarse_right, 0.0, 2.0 * right))
    to_right = _stride(foot, limit, right, np.where(coarse_left, 0.0, 2.0 * left))
    hidden = _hidden(rise, np.maximum(y_left, y_right), np.maximum(left, right) / bracket.pole)
    places = [
        np.where(coarse, np.where(coarse_left, -to_left, np.nan), place),
        np.where(coarse_right, to_right, np.nan),
    ]
    return (
        np.where(coarse, hidden, rise),
        places,
        np.where(coarse, 0.1 * np.minimum(to_left, to_right), reach),
    )


def _edge(bracket: _Bracket, tolerance: float) -> tuple[FloatArray, list[FloatArray], FloatArray]:
    """Peaks at an end of the interval: the true one may lie a little inside."""
    nodes, ordinates = bracket.nodes, bracket.ordinates
    rightward = np.isfinite(nodes[:, 3])
    near, far = (np.where(rightward, nodes[:, 2 + n], -nodes[:, 2 - n]) for n in (1, 2))
    y_near, y_far = (np.where(rightward, ordinates[:, 2 + n], ordinates[:, 2 - n]) for n in (1, 2))
    alone = ~np.isfinite(far)
    far = np.where(alone, 2.0 * near, far)
    first = (y_near - 1.0) / near
    bend = ((y_far - y_near) / (far - near) - first) / far
    slope = first - bend * near
    curved = (slope < 0.0) & (bend > 0.0)
    bend = np.where(curved, bend, 1.0)
    vertex = np.where(curved, -slope / (2.0 * bend), 0.5 * near)
    lowest = np.clip(1.0 - slope**2 / (4.0 * bend), SMALLEST, 1.0)
    # The far sample may say little of the bend at the edge; that of a pole at this distance is the sharpest.
    sharp = near / bracket.pole
    drop = np.maximum(sharp**2 - (y_near - 1.0), 0.0) / np.maximum(sharp, 1e-12)
    doubt = DOUBT * (y_near - 1.0) ** 2 + drop**2 / 8.0
    # A curve that rises from the edge without a parabola's bend is sampled half way before it is believed.
    rise = np.where(curved, 1.0 / np.sqrt(lowest), np.where((slope < 0.0) | alone, 1.5, 1.0))
    rise += doubt
    reach = np.where(curved, np.sqrt(0.5 * tolerance * lowest / bend), 0.1 * near)
    coarse = (y_near > COARSE) | (near > COARSE_GAP_AT_EDGE * bracket.pole)
    step = _stride(_foot(near, y_near), 0.9 * COARSE_GAP_AT_EDGE * bracket.pole, near, np.zeros_like(near))
    place = np.where(coarse, step, np.clip(vertex, 0.05 * near, 0.7 * near))
    rise = np.where(coarse, _hidden(rise, y_near, near / bracket.pole), rise)
    reach = np.where(coarse, 0.1 * step, np.minimum(reach, 0.3 * place))
    return rise, [np.where(rightward, place, -place)], reach


def _parabola(bracket: _Bracket) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Vertex and lowest ordinate by three samples, corrected by a fourth; size of the correction; the bend."""
    left, right = -bracket.nodes[:, 1], bracket.nodes[:, 3]
    slope_left = (1.0 - bracket.ordinates[:, 1]) / left
    slope_right = (bracket.ordinates[:, 3] - 1.0) / right
    bend = (slope_right - slope_left) / (left + right)
    slope = slope_left + bend * left
    flat = bend <= 0.0
    bend = np.where(flat, 1.0, bend)
    vertex = -slope / (2.0 * bend)
    third = _third_difference(bracket, bend)
    product = (vertex + left) * vertex * (vertex - right)
    gradient = 3.0 * vertex**2 + 2.0 * vertex * (left - right) - left * right
    plain = 1.0 - slope**2 / (4.0 * bend)
    corrected = plain + third * product - (third * gradient) ** 2 / (4.0 * bend)
    lowest = np.where(flat, 1.0, np.clip(np.minimum(plain, corrected), SMALLEST, 1.0))
    shift = third * gradient / (2.0 * bend)
    return vertex - shift, lowest, np.abs(shift), bend


def _third_difference(bracket: _Bracket, bend: FloatArray) -> FloatArray:
    """Third divided difference with the nearer of the two outer samples; 0 where there is none."""
    nodes, ordinates = bracket.nodes, bracket.ordinates
    use_left = nodes[:, 3] - nodes[:, 0] <= nodes[:, 4] - nodes[:, 1]
    outer, y_outer = (np.where(use_left, a[:, 0], a[:, 4]) for a in (nodes, ordinates))
    inner, y_inner = (np.where(use_left, a[:, 1], a[:, 3]) for a in (nodes, ordinates))
    opposite = np.where(use_left, nodes[:, 3], nodes[:, 1])
    exists = np.isfinite(outer)
    outer = np.where(exists, outer, 2.0 * inner)
    outer_bend = ((y_outer - y_inner) / (outer - inner) - (y_inner - 1.0) / inner) / outer
    return np.where(exists, (outer_bend - bend) / (outer - opposite), 0.0)


def _foot(gap: FloatArray, ordinate: FloatArray) -> FloatArray:
    """Distance of the foot of the V from the peak sample, by the sample ``gap`` away."""
    return np.asarray(gap / np.maximum(np.sqrt(ordinate) - 1.0, 1e-3))


def _stride(foot: FloatArray, limit: FloatArray, gap: FloatArray, least: FloatArray) -> FloatArray:
    """Step from the peak sample into a coarse gap.

    A neighbour in an anti-resonance puts the foot next to the sample, hence a tenth of what the gap allows at least.
    """
    limit = np.minimum(limit, 0.4 * gap)
    return np.asarray(np.minimum(np.maximum(np.clip(foot, 0.1 * limit, limit), least), 0.4 * gap))


def _hidden(rise: FloatArray, ordinate: FloatArray, gap: FloatArray) -> FloatArray:
    """Rise of a peak that a coarse neighbourhood may hide."""
    shallow = np.minimum(np.maximum(rise, 1.0 + HIDDEN_RISE * gap), COARSE_RISE)
    return np.where(ordinate > COARSE, COARSE_RISE, shallow)


def _step(vertex: FloatArray, left: FloatArray, right: FloatArray) -> FloatArray:
    """Where to sample next, from the peak sample: the vertex, kept off the samples there are.

    In a bracket much wider on one side parabolas creep, and the far sample may belong to another peak; there
    the step goes to the wide side, at least twice the narrow one.
    """
    lopsided = np.maximum(left, right) > 4.0 * np.minimum(left, right)
    side = np.where(np.where(lopsided, right > left, vertex > 0.0), 1.0, -1.0)
    gap, other = np.where(side > 0.0, right, left), np.where(side > 0.0, left, right)
    least = np.where(lopsided, 2.0 * other, 0.05 * np.minimum(gap, other))
    return np.asarray(side * np.clip(side * vertex, least, np.where(lopsided, 0.5, 0.7) * gap))
