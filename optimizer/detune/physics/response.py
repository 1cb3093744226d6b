"""Harmonic response of any number of freedoms: dynamic stiffness, solution, ellipses of phased axes, energy.

Time convention exp(+j w t), amplitudes peak: q(t) = Re(q exp(j w t)).
"""

from __future__ import annotations

import numpy as np

from detune.physics.array_types import ArrayLike, ComplexArray, FloatArray


def dynamic_stiffness(
    mass: ArrayLike, stiffness: ArrayLike, hysteretic: ArrayLike, viscous: ArrayLike, omega: ArrayLike
) -> ComplexArray:
    """D(w) = K - w^2 M + j (H + w C).

    Shapes: matrices (..., n, n), omega (...) in rad/s; leading axes broadcast together -> (..., n, n). For D
    designs at F frequencies each: matrices (D, 1, n, n), omega (D, F).
    """
    w = np.asarray(omega, dtype=float)[..., None, None]
    m, k, h, c = (np.asarray(a, dtype=float) for a in (mass, stiffness, hysteretic, viscous))
    shape = np.broadcast_shapes(m.shape, k.shape, h.shape, c.shape, w.shape)
    out = np.empty(shape, dtype=complex)
    np.subtract(k, w**2 * m, out=out.real)
    np.add(h, w * c, out=out.imag)
    return out


def solve_response(dynamic: ArrayLike, load: ArrayLike) -> ComplexArray:
    """Complex amplitudes q of D q = load, with pivoting.

    Shapes: dynamic (..., n, n); load (..., n), or (..., n, k) for k load cases when it has as many axes as
    ``dynamic``; leading axes broadcast -> (..., n) or (..., n, k). numpy.linalg.LinAlgError if a matrix is
    singular (an undamped machine exactly at resonance).
    """
    d = np.asarray(dynamic)
    f = np.asarray(load)
    if f.ndim >= d.ndim:
        return np.asarray(np.linalg.solve(d, f), dtype=complex)
    return np.asarray(np.linalg.solve(d, f[..., None])[..., 0], dtype=complex)


def ellipse_major(v: ArrayLike) -> FloatArray:
    """Major semi-axis of the ellipse that Re(v exp(j t)) traces: sqrt((|v|^2 + |v . v|) / 2).

    Shapes: v (..., 3) complex (or any number of square axes) -> (...), in the unit of v. It is the largest
    length of the vector over one period; the root-sum-square of the axis amplitudes overstates it when the
    axes are phased.
    """
    whole, plain = _squares(v)
    return np.asarray(np.sqrt((whole + plain) / 2.0))


def ellipse_minor(v: ArrayLike) -> FloatArray:
    """Minor semi-axis of the same ellipse: sqrt((|v|^2 - |v . v|) / 2). Shapes as ``ellipse_major``."""
    whole, plain = _squares(v)
    return np.asarray(np.sqrt(np.maximum(whole - plain, 0.0) / 2.0))


def mean_power(load: ArrayLike, velocity: ArrayLike) -> FloatArray:
    """Mean power of a harmonic load, Re(load^H velocity) / 2, in W.

    Shapes: load (..., n) peak in N and N m, velocity (..., n) peak in m/s and rad/s -> (...).
    """
    product = np.conj(np.asarray(load)) * np.asarray(velocity)
    return np.asarray(np.real(product).sum(axis=-1) / 2.0)


def energy_balance(
    omega: ArrayLike, hysteretic: ArrayLike, viscous: ArrayLike, displacement: ArrayLike, load: ArrayLike
) -> tuple[FloatArray, FloatArray]:
    """Mean input power of the load and mean dissipated power, in W: equal when D q = load is solved.

    Shapes: omega (...), hysteretic and viscous (..., n, n), displacement and load (..., n) complex peak
    -> (input (...), dissipated (...)). Dissipated is w q^H (H + w C) q / 2.
    """
    w = np.asarray(omega, dtype=float)
    q = np.asarray(displacement, dtype=complex)
    lossy = np.asarray(hysteretic, dtype=float) + w[..., None, None] * np.asarray(viscous, dtype=float)
    dissipated = w / 2.0 * np.real(np.sum(np.conj(q) * (lossy @ q[..., None])[..., 0], axis=-1))
    return mean_power(load, 1j * w[..., None] * q), np.asarray(dissipated)


def _squares(v: ArrayLike) -> tuple[FloatArray, FloatArray]:
    v = np.asarray(v, dtype=complex)
    whole = np.sum(v.real**2 + v.imag**2, axis=-1)
    return np.asarray(whole), np.asarray(np.abs(np.sum(v * v, axis=-1)))
