"""Damping statements of the trade, turned into complex stiffness, loss factor or viscous coefficient.

Time convention exp(+j w t): a positive imaginary part of a stiffness dissipates.
"""

from __future__ import annotations

import numpy as np

from detune.physics.array_types import ArrayLike, ComplexArray, FloatArray


def complex_stiffness(
    stiffness: ArrayLike, loss_factor: ArrayLike, viscous: ArrayLike, omega: ArrayLike
) -> ComplexArray:
    """Complex dynamic stiffness k (1 + j eta) + j omega c, for omega > 0.

    All arguments broadcast: stiffness in N/m, loss_factor dimensionless, viscous in N s/m, omega in rad/s ->
    N/m. A constant loss factor is for the frequency domain only: it is not causal (Crandall, J. Sound Vib. 11
    (1970) 3).
    """
    k, eta, c, w = (np.asarray(a, dtype=float) for a in (stiffness, loss_factor, viscous, omega))
    return np.asarray(k + 1j * (k * eta + w * c), dtype=complex)


def relaxation_stiffness(
    stiffness: ArrayLike, viscous: ArrayLike, stiffness_ratio: ArrayLike, omega: ArrayLike
) -> ComplexArray:
    """Three-parameter (Zener) element: a spring k beside a dashpot c in series with a spring N k.

    K = k + j w c N k / (N k + j w c); tends to k at rest and to k (1 + N) at high frequency. All arguments
    broadcast: N/m, N s/m, dimensionless N > 0, rad/s -> N/m. Ruzicka and Derby, Influence of Damping in
    Vibration Isolation (1971); from memory, recomputed.
    """
    k, c, ratio, w = (np.asarray(a, dtype=float) for a in (stiffness, viscous, stiffness_ratio, omega))
    dashpot = 1j * w * c
    return np.asarray(k + dashpot * ratio * k / (ratio * k + dashpot), dtype=complex)


def viscous_from_ratio_at_rated_load(
    ratio: ArrayLike, stiffness: ArrayLike, rated_mass: ArrayLike
) -> FloatArray:
    """Viscous coefficient of a part whose damping ratio is stated at rated load: c = 2 z sqrt(k m).

    All broadcast: dimensionless, N/m, kg -> N s/m. The coefficient belongs to the part; the system's ratio
    then moves with load and ballast.
    """
    ratio, stiffness, mass = (np.asarray(a, dtype=float) for a in (ratio, stiffness, rated_mass))
    return np.asarray(2.0 * ratio * np.sqrt(stiffness * mass))


def loss_factor_from_amplification(amplification: ArrayLike) -> FloatArray:
    """Loss factor from the amplification at resonance under a force, eta = 1/Q. Shapes broadcast; Q > 0.

    Q is the displacement at the natural frequency over the static one. The transmissibility peak of a mount
    with a constant loss factor is sqrt(1 + Q^2), a little more.
    """
    amplification = np.asarray(amplification, dtype=float)
    if np.any(~(amplification > 0.0)):
        raise ValueError("the amplification at resonance must be positive")
    return np.asarray(1.0 / amplification)


def loss_factor_from_transmissibility_peak(peak: ArrayLike) -> FloatArray:
    """Loss factor whose transmissibility peaks at ``peak`` = sqrt(1 + 1/eta^2), at r = 1; peak > 1."""
    peak = np.asarray(peak, dtype=float)
    if np.any(~(peak > 1.0)):
        raise ValueError("a transmissibility peak must exceed 1")
    return np.asarray(1.0 / np.sqrt((peak - 1.0) * (peak + 1.0)))


def viscous_ratio_from_amplification(amplification: ArrayLike) -> FloatArray:
    """Viscous damping ratio of a mount whose transmissibility peaks at ``amplification`` Q > 1; exact.

    At the peak T^2 = 1/(1 - r^4), and the peak condition is 2 z^2 r^4 + r^2 - 1 = 0, so with
    u = r^2 = sqrt(1 - 1/Q^2) the ratio is z = sqrt((1 - u)/2) / u. This inverts the peak height of Inman, Engineering
    Vibration, sec. 2.4. Its limit 1/(2 Q) for large Q is too small by 30 per cent at Q = 1.5 and by
    2.5 per cent at Q = 5. ValueError unless Q > 1.
    """
    q = np.asarray(amplification, dtype=float)
    if np.any(~(q > 1.0)):
        raise ValueError(
            "the transmissibility peak of a mount exceeds 1; an amplification of 1 or less has no ratio"
        )
    u = np.sqrt((1.0 - 1.0 / q) * (1.0 + 1.0 / q))
    # 1 - u without cancellation for high amplification.
    return np.asarray(np.sqrt(1.0 / (2.0 * q**2 * (1.0 + u))) / u)


def viscous_ratio_from_loss_factor(loss_factor: ArrayLike) -> FloatArray:
    """Viscous ratio with the same damping at resonance, eta/2. Well above it the two kinds differ."""
    return np.asarray(np.asarray(loss_factor, dtype=float) / 2.0)
