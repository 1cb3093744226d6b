"""The exact worst frequency of a one-axis limit over a whole range: roots of a polynomial, not a grid.

With u = w^2 both sides of a limit are polynomials in u (see `statement.PowerForm`):

    |D|^2 = c0 + b u + m^2 u^2,   viscous: c0 = k^2,       b = c^2 - 2 k m
                                  loss:    c0 = k^2 + h^2, b = -2 k m          (h = eta k)
    |K|^2 = n0 + n1 u,            viscous: n0 = k^2, n1 = c^2;  loss: n0 = k^2 + h^2, n1 = 0

Receptance form, ratio = scale u^q / |D|^2: d/du = 0 gives (q-2) m^2 u^2 + (q-1) b u + q c0 = 0.
Transmission form, ratio = scale u^r |K|^2 / |D|^2: d/du = 0 gives the cubic

    r n0 c0 + [r (n0 b + n1 c0) + n1 c0 - n0 b] u + [r (n0 a + n1 b) - 2 n0 a] u^2 + (r-1) n1 a u^3 = 0

with a = m^2. The ratio is smooth in u > 0 wherever |D| > 0, so its supremum over [ua, ub] is attained at an
end or at one of these roots. Where |D| = 0 (no damping, u = k/m) the root u = k/m is among them too and
the ratio is infinite.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from detune.sizing.statement import DampingKind, PowerForm

Floats = NDArray[np.float64]


def quadratic_roots(a: Floats, b: Floats, c: Floats) -> Floats:
    """Real roots of a x^2 + b x + c = 0 without cancellation, shape (2, ...); NaN where there is none."""
    discriminant = b * b - 4.0 * a * c
    # A double root perturbed by rounding must not vanish: it is where an island opens or closes.
    floor = -8.0 * np.finfo(float).eps * (b * b + np.abs(4.0 * a * c))
    discriminant = np.where((discriminant < 0) & (discriminant >= floor), 0.0, discriminant)
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        half = -0.5 * (b + np.where(b >= 0, 1.0, -1.0) * np.sqrt(discriminant))
        roots = np.stack([half / a, c / half])
    return np.where(np.isfinite(roots), roots, np.nan)


def moduli(
    kind: DampingKind, stiffness: Floats, gamma: Floats, mass: float
) -> tuple[Floats, Floats, Floats, Floats]:
    """Coefficients (c0, b, n0, n1) of |D|^2 and |K|^2 in u; `gamma` is c^2 or (eta k)^2."""
    k2 = stiffness * stiffness
    if kind == "viscous":
        return k2, gamma - 2.0 * stiffness * mass, k2, gamma
    loss = k2 + gamma
    return loss, -2.0 * stiffness * mass, loss, np.zeros_like(gamma)


def squared_ratio(
    form: PowerForm, kind: DampingKind, stiffness: Floats, gamma: Floats, mass: float, u: Floats
) -> Floats:
    """(response / limit)^2 at u = w^2; arrays broadcast. Infinite at an undamped resonance."""
    # (k - m u)^2 as it stands: the expanded polynomial loses half its digits at a lightly damped resonance.
    loss = gamma * u if kind == "viscous" else gamma
    dynamic = (stiffness - mass * u) ** 2 + loss
    scale = form.scale * (mass * mass if form.mass_proportional else 1.0)
    top = scale * u ** float(form.power)
    if form.transmission:
        top = top * (stiffness * stiffness + loss)
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(dynamic > 0, top / dynamic, np.inf)


def _stationary(form: PowerForm, kind: DampingKind, k: Floats, gamma: Floats, mass: float) -> Floats:
    c0, b, n0, n1 = moduli(kind, k, gamma, mass)
    a = np.full_like(c0, mass * mass)
    r = float(form.power)
    if not form.transmission:
        return quadratic_roots((r - 2.0) * a, (r - 1.0) * b, r * c0)
    p0 = r * n0 * c0
    p1 = r * (n0 * b + n1 * c0) + n1 * c0 - n0 * b
    p2 = r * (n0 * a + n1 * b) - 2.0 * n0 * a
    p3 = (r - 1.0) * n1 * a
    if form.power == 0:
        return quadratic_roots(p3, p2, p1)
    if form.power == 1 or kind == "loss factor":
        return quadratic_roots(p2, p1, p0)
    # In t = 1/u the leading coefficient is p0, which never vanishes for k > 0 and r != 0.
    companion = np.zeros((k.size, 3, 3))
    companion[:, 0, 0], companion[:, 0, 1], companion[:, 0, 2] = -p1 / p0, -p2 / p0, -p3 / p0
    companion[:, 1, 0] = companion[:, 2, 1] = 1.0
    t = np.linalg.eigvals(companion)
    real = np.where((np.abs(t.imag) <= 1e-7 * np.abs(t)) & (t.real > 0), t.real, np.nan)
    return (1.0 / real).T


def worst(
    form: PowerForm,
    kind: DampingKind,
    stiffness: Floats,
    gamma: Floats,
    mass: float,
    u_low: float,
    u_high: float,
) -> tuple[Floats, Floats]:
    """Largest (response/limit)^2 over u in [u_low, u_high] and the u where it stands, each shape (n,).

    `stiffness` and `gamma` have shape (n,). See the module docstring for the proof that the ends and the
    stationary roots are all that need be looked at.
    """
    ends = np.array([[u_low], [u_high]]) * np.ones_like(stiffness)
    if u_low == u_high:
        u = ends[:1]
    else:
        inner = _stationary(form, kind, stiffness, gamma, mass)
        inside = (inner > u_low) & (inner < u_high)
        u = np.concatenate([ends, np.where(inside, inner, u_low)])
        if np.any(gamma == 0):
            resonance = np.clip(stiffness / mass, u_low, u_high)
            u = np.concatenate([u, resonance[None]])
    ratio = squared_ratio(form, kind, stiffness, gamma, mass, u)
    best = np.argmax(ratio, axis=0)
    columns = np.arange(stiffness.size)
    return ratio[best, columns], u[best, columns]
