"""Local peaks of sampled response curves: where the true peak lies and how high it can be.

Near a resonance 1/amplitude^2 is very nearly a parabola in omega (exactly one for a single mode of small
damping), so three samples give the peak. A fourth sample tells how far the parabola can be trusted.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from detune.physics.array_types import FloatArray, IntArray

# A neighbour below 0.4 of the peak (2.3 half widths away) is too far for a parabola.
COARSE = 1.0 / 0.4**2
# Most that a sampled peak is taken to fall short of the true one while its neighbours are that far.
COARSE_RISE = 5.0
SMALLEST = 1.0 / COARSE_RISE**2


@dataclass(frozen=True)
class Peaks:
    """Sampled local peaks, flat: row, design, and what to do about each.

    rise is the true peak over the sample, at most; place is where to sample next; reach is how far from place
    a sample serves as well. Two entries with the same peak are two places to sample.
    """

    row: IntArray
    design: IntArray
    sample: FloatArray
    rise: FloatArray
    place: FloatArray
    reach: FloatArray


def local_peaks(omega: FloatArray, values: FloatArray, best: FloatArray, tolerance: float) -> Peaks:
    """Every sampled local peak that could exceed the best sample of its row.

    Shapes: omega (D, F) ascending, unused entries infinite and last; values (R, D, F), unused -inf; best (R,
    D).
    """
    peak = values > 0.0
    peak[..., 1:] &= values[..., 1:] > values[..., :-1]
    peak[..., :-1] &= values[..., :-1] >= values[..., 1:]
    peak &= values * COARSE_RISE >= best[..., None]
    row, design, i = np.nonzero(peak)
    nodes, ordinates = _neighbourhood(omega, values, row, design, i)
    sample = values[row, design, i]
    inner = np.isfinite(nodes[:, 1]) & np.isfinite(nodes[:, 3])
    alone = ~(np.isfinite(nodes[:, 1]) | np.isfinite(nodes[:, 3]))
    found = []
    for chosen, judge in ((inner, _inside), (~inner & ~alone, _edge)):
        rise, place, reach = judge(nodes[chosen], ordinates[chosen], tolerance)
        for side in range(place.shape[1]):
            found.append((row[chosen], design[chosen], sample[chosen], rise, place[:, side], reach))
    return Peaks(*(np.concatenate(part) for part in zip(*found, strict=True)))


def _neighbourhood(
    omega: FloatArray, values: FloatArray, row: IntArray, design: IntArray, i: IntArray
) -> tuple[FloatArray, FloatArray]:
    """Five samples round each peak: distance in omega (infinite where there is none), and (peak/value)^2."""
    last = omega.shape[1] - 1
    steps = np.arange(-2, 3)
    index = i[:, None] + steps
    exists = (index >= 0) & (index <= last)
    index = np.clip(index, 0, last)
    place = omega[design[:, None], index]
    exists &= np.isfinite(place)
    sample = values[row, design, i][:, None]
    value = np.where(exists, values[row[:, None], design[:, None], index], sample)
    # A zero of the response (an anti-resonance) is only far down, not infinitely far.
    ordinates = (sample / np.maximum(value, 1e-8 * sample)) ** 2
    centre = omega[design, i][:, None]
    nodes = np.where(exists, np.where(exists, place, 0.0) - centre, [-np.inf, -np.inf, 0.0, np.inf, np.inf])
    return np.column_stack([nodes, centre]), ordinates


def _inside(
    nodes: FloatArray, ordinates: FloatArray, tolerance: float
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Peaks with a neighbour on both sides: (rise, up to two places, reach)."""
    left, right, centre = -nodes[:, 1], nodes[:, 3], nodes[:, 5]
    y_left, y_right = ordinates[:, 1], ordinates[:, 3]
    slope_left, slope_right = (1.0 - y_left) / left, (y_right - 1.0) / right
    bend = (slope_right - slope_left) / (left + right)
    slope = slope_left + bend * left
    flat = bend <= 0.0
    bend = np.where(flat, 1.0, bend)
    vertex = -slope / (2.0 * bend)
    third = _third_difference(nodes, ordinates, bend)
    product = (vertex + left) * vertex * (vertex - right)
    gradient = 3.0 * vertex**2 + 2.0 * vertex * (left - right) - left * right
    lowest = 1.0 - slope**2 / (4.0 * bend)
    corrected = lowest + third * product - (third * gradient) ** 2 / (4.0 * bend)
    shift = third * gradient / (2.0 * bend)
    lowest = np.clip(np.minimum(lowest, corrected), SMALLEST, 1.0)
    rise = np.where(flat, 1.0, 1.0 / np.sqrt(lowest))
    place = _step(vertex - shift, left, right)
    reach = np.maximum(np.sqrt(0.5 * tolerance * lowest / bend), 0.3 * np.abs(shift))
    reach = np.minimum(reach, 0.3 * np.abs(place))
    # Too far for a parabola: 1/amplitude is a V with its foot about one half width from the peak sample.
    coarse = np.maximum(y_left, y_right) > COARSE
    foot = np.minimum(_foot_distance(left, y_left), _foot_distance(right, y_right))
    to_left = np.minimum(np.maximum(foot, 0.5 * np.where(y_right > COARSE, 0.0, right)), 0.4 * left)
    to_right = np.minimum(np.maximum(foot, 0.5 * np.where(y_left > COARSE, 0.0, left)), 0.4 * right)
    places = np.stack(
        [
            np.where(coarse, np.where(y_left > COARSE, -to_left, np.nan), place),
            np.where(coarse & (y_right > COARSE), to_right, np.nan),
        ],
        axis=1,
    )
    rise = np.where(coarse, COARSE_RISE, rise)
    reach = np.where(coarse, 0.3 * np.minimum(to_left, to_right), reach)
    return rise, places + centre[:, None], reach


def _edge(
    nodes: FloatArray, ordinates: FloatArray, tolerance: float
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Peaks at the end of the interval: the true one may lie a little inside."""
    sign = np.where(np.isfinite(nodes[:, 3]), 1.0, -1.0)
    rightward = sign > 0.0
    near = np.where(rightward, nodes[:, 3], -nodes[:, 1])
    far = np.where(rightward, nodes[:, 4], -nodes[:, 0])
    y_near = np.where(rightward, ordinates[:, 3], ordinates[:, 1])
    y_far = np.where(rightward, ordinates[:, 4], ordinates[:, 0])
    two_only = ~np.isfinite(far)
    far = np.where(two_only, 2.0 * near, far)
    first = (y_near - 1.0) / near
    bend = ((y_far - y_near) / (far - near) - first) / far
    slope = first - bend * near
    inside = (slope < 0.0) & (bend > 0.0)
    safe = np.where(inside, bend, 1.0)
    vertex = np.where(inside, -slope / (2.0 * safe), 0.5 * near)
    lowest = np.clip(1.0 - slope**2 / (4.0 * safe), SMALLEST, 1.0)
    # A curve that rises from the edge without a parabola's bend is sampled half way before it is believed.
    rise = np.where(inside, 1.0 / np.sqrt(lowest), np.where(slope < 0.0, 1.5, 1.0))
    rise = np.where(two_only, 1.5, rise)
    reach = np.where(inside, np.sqrt(0.5 * tolerance * lowest / safe), 0.1 * near)
    coarse = y_near > COARSE
    step = np.minimum(_foot_distance(near, y_near), 0.4 * near)
    place = np.where(coarse, step, np.clip(vertex, 0.05 * near, 0.7 * near))
    rise = np.where(coarse, COARSE_RISE, rise)
    reach = np.where(coarse, 0.3 * step, np.minimum(reach, 0.3 * place))
    return rise, (nodes[:, 5] + sign * place)[:, None], reach


def _third_difference(nodes: FloatArray, ordinates: FloatArray, bend: FloatArray) -> FloatArray:
    """Third divided difference with the nearer of the two outer samples; 0 where there is none."""
    left_span, right_span = nodes[:, 3] - nodes[:, 0], nodes[:, 4] - nodes[:, 1]
    use_left = left_span <= right_span
    outer = np.where(use_left, nodes[:, 0], nodes[:, 4])
    y_outer = np.where(use_left, ordinates[:, 0], ordinates[:, 4])
    inner = np.where(use_left, nodes[:, 1], nodes[:, 3])
    y_inner = np.where(use_left, ordinates[:, 1], ordinates[:, 3])
    opposite = np.where(use_left, nodes[:, 3], nodes[:, 1])
    exists = np.isfinite(outer)
    outer = np.where(exists, outer, 2.0 * inner)
    outer_bend = ((y_outer - y_inner) / (outer - inner) - (y_inner - 1.0) / inner) / outer
    return np.where(exists, (outer_bend - bend) / (outer - opposite), 0.0)


def _foot_distance(gap: FloatArray, ordinate: FloatArray) -> FloatArray:
    """Distance of the foot of the V from the peak sample, by the sample ``gap`` away."""
    return np.asarray(gap / np.maximum(np.sqrt(ordinate) - 1.0, 1e-3))


def _step(vertex: FloatArray, left: FloatArray, right: FloatArray) -> FloatArray:
    """Where to sample next, from the peak sample: the vertex, kept off the samples there are.

    In a bracket much wider on one side parabolas creep, and the far sample may belong to another peak; there the
    step goes to the wide side, at least twice the narrow one.
    """
    lopsided = np.maximum(left, right) > 4.0 * np.minimum(left, right)
    side = np.where(np.where(lopsided, right > left, vertex > 0.0), 1.0, -1.0)
    gap, other = np.where(side > 0.0, right, left), np.where(side > 0.0, left, right)
    least = np.where(lopsided, 2.0 * other, 0.05 * np.minimum(gap, other))
    return np.asarray(side * np.clip(side * vertex, least, np.where(lopsided, 0.5, 0.7) * gap))
