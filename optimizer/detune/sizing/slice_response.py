"""One limit on one design of unit mass, number by number: its worst frequency and the damping it allows.

With u = w^2, unit mass, and h = gamma u (viscous, gamma = c^2) or gamma (loss factor, gamma = (eta k)^2):

    |D|^2 = (k - u)^2 + h          |K|^2 = k^2 + h
    receptance form    level u^q <= |D|^2
    transmission form  level u^r |K|^2 <= |D|^2

Both sides are polynomials in u, so the worst u of a range is an end or a root of a polynomial (`worst_place`).
At one u a limit bounds gamma by a parabola in k (`needed_damping`):

    gamma >= (level u^q [k^2] - (k - u)^2) / (s free),   s = u or 1,   free = 1, or 1 - level u^r

from below where free > 0, from above where it is negative. Everything below the mark runs interpreted or compiled.
"""

from __future__ import annotations

import math
from typing import Any

from detune.sizing.slice_data import HIGH, LOW, POWER, TRANSMISSION, Bench, Question

EPSILON = 2.220446049250313e-16
# A limit counts as exceeded when its squared ratio is above one by more than this.
VIOLATION = 1e-11
# Where a level is this close to one, damping neither helps nor harms.
NEITHER = 1e-12

# --- compiled below ---


def quadratic_roots(a: float, b: float, c: float) -> tuple[float, float]:
    """Real roots of a x^2 + b x + c without cancellation, NaN where there is none.

    A double root perturbed by rounding is kept: it is where an island opens or closes.
    """
    discriminant = b * b - 4.0 * a * c
    if discriminant < 0.0:
        if discriminant < -8.0 * EPSILON * (b * b + abs(4.0 * a * c)):
            return math.nan, math.nan
        discriminant = 0.0
    half = -0.5 * (b + math.sqrt(discriminant)) if b >= 0.0 else -0.5 * (b - math.sqrt(discriminant))
    first = half / a if a != 0.0 else math.nan
    second = c / half if half != 0.0 else math.nan
    return first, second


def polynomial_at(coefficients: Any, degree: int, x: float) -> float:
    """Horner's rule, lowest power first."""
    value = coefficients[degree]
    for j in range(degree - 1, -1, -1):
        value = value * x + coefficients[j]
    return float(value)


def bracketed_root(coefficients: Any, degree: int, low: float, high: float, at_low: float) -> float:
    """The root of a polynomial that changes its sign once in [low, high]: Newton's step, halving where it leaves."""
    x = 0.5 * (low + high)
    for _ in range(200):
        value = coefficients[degree]
        slope = 0.0
        for j in range(degree - 1, -1, -1):
            slope = slope * x + value
            value = value * x + coefficients[j]
        if value == 0.0:
            return x
        if (value < 0.0) == (at_low < 0.0):
            low = x
        else:
            high = x
        step = x - value / slope if slope != 0.0 else low
        if not low < step < high:
            step = 0.5 * (low + high)
        if abs(step - x) <= 2.0 * EPSILON * abs(x) or high - low <= 2.0 * EPSILON * abs(x):
            return step
        x = step
    return x


def roots_between(degree: int, low: float, high: float, bench: Bench) -> int:
    """Roots in [low, high] where the polynomial on the bench changes sign, rising, on the bench; their number.

    Between two neighbouring roots of its derivative a polynomial has one root at most; so from the linear
    derivative upwards.
    """
    polynomial, roots, spare, derivative = bench.work[0], bench.work[1], bench.work[2], bench.work[3]
    count = 0
    for order in range(degree - 1, -1, -1):
        own = degree - order
        for j in range(own + 1):
            factor = polynomial[j + order]
            for t in range(order):
                factor *= j + order - t
            derivative[j] = factor
        new = 0
        a = low
        at_a = polynomial_at(derivative, own, a)
        for i in range(count + 1):
            b = roots[i] if i < count else high
            at_b = polynomial_at(derivative, own, b)
            if at_a == 0.0:
                spare[new] = a
                new += 1
            elif at_b != 0.0 and (at_a < 0.0) != (at_b < 0.0):
                spare[new] = bracketed_root(derivative, own, a, b, at_a)
                new += 1
            a, at_a = b, at_b
        if at_a == 0.0 and new < own:
            spare[new] = a
            new += 1
        count = new if new <= own else own
        for i in range(count):
            roots[i] = spare[i]
    return count


def squared_ratio(question: Question, bench: Bench, i: int, k: float, gamma: float, u: float) -> float:
    """(response / limit)^2 of limit i; infinite at an undamped resonance.

    (k - u)^2 stands as it is: the expanded polynomial loses half its digits at a lightly damped resonance.
    """
    loss = gamma * u if question.viscous == 1 else gamma
    dynamic = (k - u) * (k - u) + loss
    if dynamic <= 0.0:
        return math.inf
    top = bench.level[i] * u ** int(question.limits[i][POWER])
    if question.limits[i][TRANSMISSION] == 1:
        top *= k * k + loss
    return float(top / dynamic)


def worst_place(question: Question, bench: Bench, i: int, k: float, gamma: float) -> tuple[float, float]:
    """Largest (response / limit)^2 of limit i over its range, and the u where it stands.

    With |D|^2 = c0 + b u + u^2 and |K|^2 = n0 + n1 u the ratio is stationary where

        (q - 2) u^2 + (q - 1) b u + q c0 = 0                                                    (receptance)
        r n0 c0 + [r (n0 b + n1 c0) + n1 c0 - n0 b] u + [r (n0 + n1 b) - 2 n0] u^2 + (r - 1) n1 u^3 = 0

    and nowhere else where |D| > 0; where |D| = 0, u = k is among the places looked at.
    """
    low, high = question.limits[i][LOW], question.limits[i][HIGH]
    best = squared_ratio(question, bench, i, k, gamma, low)
    place = low
    if high == low:
        return best, place
    ratio = squared_ratio(question, bench, i, k, gamma, high)
    if ratio > best:
        best, place = ratio, high
    if low < k < high:
        ratio = squared_ratio(question, bench, i, k, gamma, k)
        if ratio > best:
            best, place = ratio, k
    if question.viscous == 1:
        c0, b, n1 = k * k, gamma - 2.0 * k, gamma
    else:
        c0, b, n1 = k * k + gamma, -2.0 * k, 0.0
    r = question.limits[i][POWER]
    first, second = math.nan, math.nan
    if question.limits[i][TRANSMISSION] == 0:
        first, second = quadratic_roots(r - 2.0, (r - 1.0) * b, r * c0)
    else:
        p0 = r * c0 * c0
        p1 = r * (c0 * b + n1 * c0) + n1 * c0 - c0 * b
        p2 = r * (c0 + n1 * b) - 2.0 * c0
        p3 = (r - 1.0) * n1
        if r == 0:
            first, second = quadratic_roots(p3, p2, p1)
        elif p3 == 0.0:
            first, second = quadratic_roots(p2, p1, p0)
        else:
            polynomial, roots = bench.work[0], bench.work[1]
            polynomial[0], polynomial[1], polynomial[2], polynomial[3] = p0, p1, p2, p3
            for j in range(roots_between(3, low, high, bench)):
                ratio = squared_ratio(question, bench, i, k, gamma, roots[j])
                if ratio > best:
                    best, place = ratio, roots[j]
    for root in (first, second):
        if low < root < high:
            ratio = squared_ratio(question, bench, i, k, gamma, root)
            if ratio > best:
                best, place = ratio, root
    return best, place


def needed_damping(question: Question, bench: Bench, i: int, k: float, u: float) -> tuple[float, float]:
    """The gamma at which limit i is met with equality at u, and `free`: positive when more damping helps."""
    level = bench.level[i] * u ** int(question.limits[i][POWER])
    free = 1.0
    top = level
    if question.limits[i][TRANSMISSION] == 1:
        free = 1.0 - level
        top = level * k * k
    loss = u if question.viscous == 1 else 1.0
    if free == 0.0:
        return math.inf, 0.0
    return (top - (k - u) * (k - u)) / (loss * free), free


def stationary_bound(question: Question, bench: Bench, i: int, k: float, low: float, high: float) -> int:
    """Places u in [low, high] where the parabola of limit i, seen over u at one k, is stationary; their number.

    With A^2 the level and t = A^2 u^r the derivative of `needed_damping` in u vanishes where

        viscous, receptance      (q - 1) A^2 u^q + k^2 - u^2 = 0
        loss, receptance         q A^2 u^(q-1) + 2 (k - u) = 0
        viscous, transmission    k^2 (1 - t)^2 - u^2 (1 - t) + r t u (2 k - u) = 0
        loss, transmission       2 (k - u) + t (2 (r - 1) k + (2 - r) u) = 0

    each times the power of u that makes it a polynomial.
    """
    level, r = bench.level[i], int(question.limits[i][POWER])
    c = bench.work[0]
    for j in range(len(c)):
        c[j] = 0.0
    if question.limits[i][TRANSMISSION] == 0.0:
        if question.viscous == 1:
            c[r] += (r - 1.0) * level
            c[0] += k * k
            c[2] += -1.0
            degree = max(r, 2)
        else:
            if r > 0:
                c[r - 1] += r * level
            c[0] += 2.0 * k
            c[1] += -2.0
            degree = max(r - 1, 1)
    elif question.viscous == 1:
        shift = 0 if r >= 0 else -2 * r
        c[shift] += k * k
        c[shift + r] += -2.0 * k * k * level
        c[shift + 2 * r] += k * k * level * level
        c[shift + 2] += -1.0
        c[shift + 2 + r] += (1.0 - r) * level
        c[shift + 1 + r] += 2.0 * k * r * level
        degree = max(2 * r, 2 + max(r, 0)) if r >= 0 else shift + 2
    else:
        shift = 0 if r >= 0 else -r
        c[shift] += 2.0 * k
        c[shift + 1] += -2.0
        c[shift + r] += 2.0 * (r - 1.0) * level * k
        c[shift + r + 1] += (2.0 - r) * level
        degree = shift + 1 + max(r, 0)
    return roots_between(degree, low, high, bench)


def part_of_range(question: Question, bench: Bench, i: int, asks: bool) -> tuple[float, float, float]:
    """[low, high] of the u in range i where its line asks for damping (or, `asks` False, allows so much), and u where
    neither.

    low > high where there is none. Third: the u within the range where the level passes one (0: there is none).
    """
    low, high, power = question.limits[i][LOW], question.limits[i][HIGH], int(question.limits[i][POWER])
    if question.limits[i][TRANSMISSION] == 0.0:
        return (low, high, 0.0) if asks else (1.0, 0.0, 0.0)
    one, other = bench.level[i] * low**power, bench.level[i] * high**power
    if max(one, other) < 1.0:
        return (low, high, 0.0) if asks else (1.0, 0.0, 0.0)
    if min(one, other) > 1.0:
        return (1.0, 0.0, 0.0) if asks else (low, high, 0.0)
    if power == 0:
        return 1.0, 0.0, low
    passes = min(max(bench.level[i] ** (-1.0 / power), low), high)
    if (one < 1.0) == asks:
        return low, passes, passes
    return passes, high, passes


def bounding_damping(question: Question, bench: Bench, i: int, k: float, asks: bool) -> tuple[float, float]:
    """The least gamma limit i asks for over its range at k (`asks`), or the greatest it allows, and the u that sets it.

    Minus or plus infinite where it asks for none or allows any; the other infinity where no gamma serves.
    """
    sign = 1.0 if asks else -1.0
    best, place = -math.inf, 0.0
    low, high, passes = part_of_range(question, bench, i, asks)
    # Where the level is one damping neither helps nor harms: k^2 <= (k - u)^2 or nothing.
    if passes > 0.0 and k * k > (k - passes) * (k - passes) * (1.0 + VIOLATION):
        return sign * math.inf, passes
    if low > high:
        return sign * best, place
    count = stationary_bound(question, bench, i, k, low, high)
    for j in range(count + 2):
        u = low if j == 0 else (high if j == 1 else bench.work[1][j - 2])
        bound, free = needed_damping(question, bench, i, k, u)
        if free * sign > NEITHER and sign * bound > best:
            best, place = sign * bound, u
    return sign * best, place


def ridge(
    question: Question, bench: Bench, i: int, k: float, share: float
) -> tuple[float, float, float, float]:
    """(value, slope) at k of a convex C, and (e1, e2): gamma >= C(k) + e1 k + e2 k^2 where u = share k is in range.

    The line at u = share k seen along k. With d = (1 - share)^2, t = A^2 u^r:

        viscous, receptance      A^2 share^(q-1) k^(q-1)  -  k d/share
        loss, receptance         A^2 share^q k^q  -  d k^2
        viscous, transmission    (1 - d) k t/(share (1 - t))  -  k d/share
        loss, transmission       (1 - d) k^2 t/(1 - t)  -  d k^2

    C is a sum of powers of k none of which lies between zero and one. Where u = share k is the worst of its range this
    touches the least gamma over the range, so its tangent is Newton's step on it.
    """
    level, r = bench.level[i], int(question.limits[i][POWER])
    apart = (1.0 - share) * (1.0 - share)
    viscous = question.viscous == 1
    own = 1 if viscous else 2
    if question.limits[i][TRANSMISSION] == 0.0:
        power = r + own - 2
        value = level * (share * k) ** power
        slope = power * value / k
    else:
        t = level * (share * k) ** r
        value = (1.0 - apart) * k**own * t / (1.0 - t)
        slope = value / k * (own + r / (1.0 - t))
        if viscous:
            value, slope = value / share, slope / share
    if viscous:
        return value, slope, -apart / share, 0.0
    return value, slope, 0.0, -apart


def rounding_of(question: Question, bench: Bench, i: int, k: float, u: float) -> float:
    """How far rounding may move what `needed_damping` says."""
    level = bench.level[i] * u ** int(question.limits[i][POWER])
    size = 2.0 * k * k + u * u + level
    free = 1.0
    if question.limits[i][TRANSMISSION] == 1.0:
        size += level * k * k
        free = abs(1.0 - level)
    loss = u if question.viscous == 1 else 1.0
    return float(16.0 * EPSILON * size / (loss * max(free, NEITHER)))
