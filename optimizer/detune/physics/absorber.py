"""Tuned absorber on one mass: closed forms of the literature, and the exact best tuning by computation.

Primary: mass 1, natural frequency 1, damping ratio z1. Absorber: mass ratio mu, frequency ratio f =
absorber's own frequency over the primary's, damping ratio z2 = c2/(2 m2 w2), referred to the ABSORBER'S OWN
frequency throughout. Den Hartog's book refers it to the primary's frequency; `ratio_on_primary` converts (z2
f). Frequencies are ratios r = w/w1 to the primary's own natural frequency.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.polynomial import polynomial

from detune.physics.array_types import ArrayLike, ComplexArray, FloatArray

Response = Literal[
    "displacement",
    "velocity",
    "acceleration",
    "transmitted force",
    "base motion",
    "base deflection",
    "stroke",
]
RESPONSES: dict[Response, str] = {
    "displacement": "x1 k1/F: primary displacement under a force on it, over the static one",
    "velocity": "x1' m1 w1/F: primary velocity under a force on it",
    "acceleration": "x1'' m1/F: primary acceleration under a force; also its displacement under an unbalance",
    "transmitted force": "force of spring and damper into the ground over the force on the primary",
    "base motion": "x1/y: primary over base displacement (the same function as transmitted force)",
    "base deflection": "(x1 - y) w1^2/y'': deflection of the primary's mount under base acceleration",
    "stroke": "(x2 - x1) k1/F: deflection of the absorber's own spring under a force on the primary",
}

# Mass ratios (least, greatest) and the greatest damping of the primary that the fit of Ioi and Ikeda is for.
FITTED = (0.03, 0.4, 0.15)


@dataclass(frozen=True)
class AbsorberTuning:
    """Frequency ratio f, damping ratio z2 (of the absorber's own frequency), and what the tuning reaches.

    reached: greatest magnitude of the response (harmonic) or its variance (random), as the function that made
    it says; NaN where its source states none.
    """

    frequency_ratio: float
    damping_ratio: float
    reached: float


def ratio_on_primary(tuning: AbsorberTuning) -> float:
    """Damping ratio of the absorber referred to the primary's frequency, c2/(2 m2 w1), as Den Hartog
    writes it.
    """
    return tuning.damping_ratio * tuning.frequency_ratio


def absorber_parts(
    primary_mass: float, primary_omega: float, mass_ratio: float, tuning: AbsorberTuning
) -> tuple[float, float, float]:
    """Absorber mass in kg, stiffness in N/m and viscous coefficient in N s/m; primary_omega in rad/s."""
    mass = mass_ratio * primary_mass
    omega = tuning.frequency_ratio * primary_omega
    return mass, mass * omega**2, 2.0 * tuning.damping_ratio * mass * omega


def den_hartog(mass_ratio: float) -> AbsorberTuning:
    """Fixed points of equal height for the displacement under a harmonic force, undamped primary.

    f = 1/(1 + mu), z2 = sqrt(3 mu/(8 (1 + mu))), height of the fixed points sqrt(1 + 2/mu). The true maximum
    of this tuning is 0.1 to 0.5 % higher. J. P. Den Hartog, Mechanical Vibrations, sec. 3.3; J. E. Brock, J.
    Appl. Mech. 13 (1946) A-284.
    """
    mu = _mass_ratio(mass_ratio)
    return AbsorberTuning(1.0 / (1.0 + mu), _root(3.0 * mu / (8.0 * (1.0 + mu))), _root(1.0 + 2.0 / mu))


def nishihara_asami(mass_ratio: float) -> AbsorberTuning:
    """The exact least greatest displacement under a harmonic force, undamped primary.

    With a = sqrt(4 + 3 mu): f = 2/(1 + mu) sqrt(2 (16 + 23 mu + 9 mu^2 + 2 (2 + mu) a)/(3 (64 + 80 mu + 27
    mu^2))), z2 = sqrt((8 + 9 mu - 4 a)/(1 + mu))/4, height sqrt(((8 + 9 mu)^2 (16 + 9 mu) - 128 a^3)/(3 (32 +
    27 mu)))/(3 mu). O. Nishihara, T. Asami, J. Vib. Acoust. 124 (2002) 576.
    """
    mu = _mass_ratio(mass_ratio)
    a = _root(4.0 + 3.0 * mu)
    square = 2.0 * (16.0 + 23.0 * mu + 9.0 * mu**2 + 2.0 * (2.0 + mu) * a)
    frequency = 2.0 / (1.0 + mu) * _root(square / (3.0 * (64.0 + 80.0 * mu + 27.0 * mu**2)))
    damping = 0.25 * _root((8.0 + 9.0 * mu - 4.0 * a) / (1.0 + mu))
    height = ((8.0 + 9.0 * mu) ** 2 * (16.0 + 9.0 * mu) - 128.0 * a**3) / (3.0 * (32.0 + 27.0 * mu))
    return AbsorberTuning(frequency, damping, _root(height) / (3.0 * mu))


def ioi_ikeda(mass_ratio: float, primary_damping: float) -> AbsorberTuning:
    """Fitted to the least greatest displacement under a harmonic force of a DAMPED primary.

    f = 1/(1 + mu) - (.241 + 1.7 mu - 2.6 mu^2) z1 - (1 - 1.9 mu + mu^2) z1^2, z2 = sqrt(3 mu/(8 (1 + mu))) + (.13 +
    .12 mu + .4 mu^2) z1 - (.01 + .9 mu + 3 mu^2) z1^2, within 1 % for mu from .03 to .4 and z1 up to .15. T. Ioi, K.
    Ikeda, Bull. JSME 21 (1978) 64. Raises ValueError outside that range.
    """
    mu, z1 = _mass_ratio(mass_ratio), primary_damping
    if not (FITTED[0] <= mu <= FITTED[1] and 0.0 <= z1 <= FITTED[2]):
        raise ValueError("fitted for mass ratios from 0.03 to 0.4 and damping ratios up to 0.15")
    frequency = 1.0 / (1.0 + mu) - (0.241 + 1.7 * mu - 2.6 * mu**2) * z1 - (1.0 - 1.9 * mu + mu**2) * z1**2
    damping = _root(3.0 * mu / (8.0 * (1.0 + mu))) + (0.13 + 0.12 * mu + 0.4 * mu**2) * z1
    return AbsorberTuning(frequency, damping - (0.01 + 0.9 * mu + 3.0 * mu**2) * z1**2, float("nan"))


def warburton_force_acceleration(mass_ratio: float) -> AbsorberTuning:
    """Fixed points for the acceleration under a harmonic force (the displacement under an unbalance).

    f = 1/sqrt(1 + mu), z2^2 = 3 mu/(8 (1 + mu/2)), height sqrt(2/(mu (1 + mu))). G. B. Warburton, Earthquake
    Engng Struct. Dyn. 10 (1982) 381.
    """
    mu = _mass_ratio(mass_ratio)
    return AbsorberTuning(
        1.0 / _root(1.0 + mu), _root(3.0 * mu / (8.0 * (1.0 + 0.5 * mu))), _root(2.0 / (mu * (1.0 + mu)))
    )


def warburton_base_deflection(mass_ratio: float) -> AbsorberTuning:
    """Fixed points for the mount's deflection under harmonic base acceleration.

    f = sqrt(1 - mu/2)/(1 + mu), z2^2 = 3 mu/(8 (1 + mu)(1 - mu/2)), height (1 + mu) sqrt(2/mu); mu < 2.
    Warburton, as above.
    """
    mu = _mass_ratio(mass_ratio, 2.0)
    return AbsorberTuning(
        _root(1.0 - 0.5 * mu) / (1.0 + mu),
        _root(3.0 * mu / (8.0 * (1.0 + mu) * (1.0 - 0.5 * mu))),
        (1.0 + mu) * _root(2.0 / mu),
    )


def white_noise_force(mass_ratio: float) -> AbsorberTuning:
    """Least variance of the displacement under a white force of unit intensity, undamped primary.

    f = sqrt(1 + mu/2)/(1 + mu), z2^2 = mu (1 + 3 mu/4)/(4 (1 + mu)(1 + mu/2)). reached is the variance 1/(4
    z_eq) with the equivalent damping z_eq = sqrt(mu (1 + mu)/(1 + 3 mu/4))/4 of the primary. Warburton, as
    above; R. W. Luft, J. Struct. Div. ASCE 105 (1979) 2766.
    """
    mu = _mass_ratio(mass_ratio)
    damping = _root(mu * (1.0 + 0.75 * mu) / (4.0 * (1.0 + mu) * (1.0 + 0.5 * mu)))
    equivalent = 0.25 * _root(mu * (1.0 + mu) / (1.0 + 0.75 * mu))
    return AbsorberTuning(_root(1.0 + 0.5 * mu) / (1.0 + mu), damping, 0.25 / equivalent)


def white_noise_velocity(mass_ratio: float) -> AbsorberTuning:
    """Least variance of the velocity under a white force of unit intensity, undamped primary.

    f = 1/sqrt(1 + mu), z2 = sqrt(mu)/2, variance 1/sqrt(mu (1 + mu)): the least kinetic energy. S. H. Crandall, W. D.
    Mark, Random Vibration in Mechanical Systems (1963); the variance recomputed.
    """
    mu = _mass_ratio(mass_ratio)
    return AbsorberTuning(1.0 / _root(1.0 + mu), 0.5 * _root(mu), 1.0 / _root(mu * (1.0 + mu)))


def white_noise_base_deflection(mass_ratio: float) -> AbsorberTuning:
    """Least variance of the mount's deflection under white base acceleration, undamped primary, mu < 2.

    f = sqrt(1 - mu/2)/(1 + mu), z2^2 = mu (1 - mu/4)/(4 (1 + mu)(1 - mu/2)). Warburton, as above.
    """
    mu = _mass_ratio(mass_ratio, 2.0)
    damping = _root(mu * (1.0 - 0.25 * mu) / (4.0 * (1.0 + mu) * (1.0 - 0.5 * mu)))
    return AbsorberTuning(_root(1.0 - 0.5 * mu) / (1.0 + mu), damping, float("nan"))


def equal_modal_damping(mass_ratio: float, primary_damping: float = 0.0) -> AbsorberTuning:
    """Both modes with the same damping (for an undamped primary they coalesce).

    f = (1 - z1 sqrt(mu/(1 + mu)))/(1 + mu), z2 = z1/(1 + mu) + sqrt(mu/(1 + mu)). F. Sadek et al., Earthquake
    Engng Struct. Dyn. 26 (1997) 617.
    """
    mu = _mass_ratio(mass_ratio)
    share = _root(mu / (1.0 + mu))
    frequency = (1.0 - primary_damping * share) / (1.0 + mu)
    return AbsorberTuning(frequency, primary_damping / (1.0 + mu) + share, float("nan"))


def fixed_points(mass_ratio: float, frequency_ratio: float) -> tuple[float, float]:
    """The two r at which the displacement of an undamped primary is the same for any absorber damping.

    (2 + mu) r^4 - 2 (1 + f^2 (1 + mu)) r^2 + 2 f^2 = 0.
    """
    mu, square = _mass_ratio(mass_ratio), frequency_ratio**2
    half = 1.0 + square * (1.0 + mu)
    root = _root(half**2 - 2.0 * square * (2.0 + mu))
    return _root((half - root) / (2.0 + mu)), _root((half + root) / (2.0 + mu))


def split_frequencies(mass_ratio: float, frequency_ratio: float) -> tuple[float, float]:
    """The two natural frequencies r of primary and absorber without damping: r1 r2 = f."""
    mu, square = _mass_ratio(mass_ratio), frequency_ratio**2
    half = 0.5 * (1.0 + square * (1.0 + mu))
    upper = half + _root(half**2 - square)
    return _root(square / upper), _root(upper)


def absorber_response(
    r: ArrayLike,
    mass_ratio: float,
    frequency_ratio: float,
    damping_ratio: float,
    response: Response = "displacement",
    primary_damping: float = 0.0,
) -> ComplexArray:
    """Complex response (see RESPONSES) at frequency ratios r, any shape."""
    top, bottom = _fraction(mass_ratio, frequency_ratio, damping_ratio, response, primary_damping)
    s = 1j * np.asarray(r, dtype=float)
    return np.asarray(polynomial.polyval(s, top) / polynomial.polyval(s, bottom))


def largest_response(
    mass_ratio: float,
    frequency_ratio: float,
    damping_ratio: float,
    response: Response = "displacement",
    primary_damping: float = 0.0,
) -> tuple[float, float]:
    """Greatest magnitude over all frequencies, and the r where it stands; from the roots of a polynomial,
    no grid.
    """
    top, bottom = _fraction(mass_ratio, frequency_ratio, damping_ratio, response, primary_damping)
    above, below = _squared_magnitude(top), _squared_magnitude(bottom)
    rising = polynomial.polymul(polynomial.polyder(above), below)
    slope = polynomial.polysub(rising, polynomial.polymul(above, polynomial.polyder(below)))
    roots = np.asarray(polynomial.polyroots(np.trim_zeros(slope, "b")), dtype=complex)
    places = roots.real[(roots.real > 0.0) & (np.abs(roots.imag) < 1e-6 * np.abs(roots.real))]
    # A far frequency stands for the limit at infinity, which the acceleration approaches.
    places = np.r_[0.0, places, 1e8]
    values = np.asarray(polynomial.polyval(places, above) / polynomial.polyval(places, below))
    best = int(np.argmax(values))
    return float(np.sqrt(values[best])), float(np.sqrt(places[best]))


def response_variance(
    mass_ratio: float,
    frequency_ratio: float,
    damping_ratio: float,
    response: Response = "displacement",
    primary_damping: float = 0.0,
) -> float:
    """Variance under white noise of unit intensity, for the responses that have one, in closed form.

    White force for "displacement", "transmitted force", "stroke"; white base acceleration for "base
    deflection". Integral of |B/A|^2/(2 pi) over all w by splitting it into partial fractions (H. M. James, N.
    B. Nichols, R. S. Phillips, Theory of Servomechanisms, 1947, appendix). Raises ValueError where it is
    infinite.
    """
    top, bottom = _fraction(mass_ratio, frequency_ratio, damping_ratio, response, primary_damping)
    top = np.trim_zeros(top, "b")
    order = bottom.size - 1
    if top.size > order:
        raise ValueError(f"the {response} under white noise has no variance")
    # B(s) B(-s) = X(s) A(-s) + X(-s) A(s): X/A is the part of the response after time 0, where its value is
    # the leading coefficient of X over that of A.
    mirrored = polynomial.polymul(top, top * (-1.0) ** np.arange(top.size))
    even = np.zeros(order)
    even[: mirrored[::2].size] = mirrored[::2]
    hurwitz = np.zeros((order, order))
    for row in range(order):
        for column in range(order):
            power = 2 * row - column
            if 0 <= power <= order:
                hurwitz[row, column] = bottom[power] * (-1.0) ** column
    return float(np.linalg.solve(hurwitz, 0.5 * even)[order - 1] / bottom[order])


def minimax_tuning(
    mass_ratio: float, response: Response = "displacement", primary_damping: float = 0.0
) -> AbsorberTuning:
    """The tuning with the least greatest magnitude over all frequencies, exact to 1e-6; damped primary
    allowed.
    """

    def worst(frequency_ratio: float, damping_ratio: float) -> float:
        return largest_response(mass_ratio, frequency_ratio, damping_ratio, response, primary_damping)[0]

    return _least(worst, _mass_ratio(mass_ratio))


def least_variance_tuning(
    mass_ratio: float, response: Response = "displacement", primary_damping: float = 0.0
) -> AbsorberTuning:
    """The tuning with the least variance under white noise (see `response_variance`); damped primary
    allowed.
    """

    def spread(frequency_ratio: float, damping_ratio: float) -> float:
        return response_variance(mass_ratio, frequency_ratio, damping_ratio, response, primary_damping)

    return _least(spread, _mass_ratio(mass_ratio))


def _mass_ratio(mass_ratio: float, limit: float = float("inf")) -> float:
    if not 0.0 < mass_ratio < limit:
        raise ValueError(f"the mass ratio lies above 0 and below {limit:g}")
    return float(mass_ratio)


def _root(value: float) -> float:
    return float(np.sqrt(value))


def _fraction(
    mass_ratio: float,
    frequency_ratio: float,
    damping_ratio: float,
    response: Response,
    primary_damping: float,
) -> tuple[FloatArray, FloatArray]:
    """Numerator and denominator in s (lowest power first) of a response of primary and absorber."""
    mu = _mass_ratio(mass_ratio)
    spring = np.array([mu * frequency_ratio**2, 2.0 * damping_ratio * mu * frequency_ratio, 0.0])
    inner = spring + np.array([0.0, 0.0, mu])
    primary = np.array([1.0, 2.0 * primary_damping, 1.0])
    bottom = polynomial.polysub(
        polynomial.polymul(primary + spring, inner), polynomial.polymul(spring, spring)
    )
    ground = np.array([1.0, 2.0 * primary_damping])
    tops: dict[Response, FloatArray] = {
        "displacement": inner,
        "velocity": polynomial.polymul(inner, [0.0, 1.0]),
        "acceleration": polynomial.polymul(inner, [0.0, 0.0, 1.0]),
        "transmitted force": polynomial.polymul(inner, ground),
        "base motion": polynomial.polymul(inner, ground),
        "base deflection": -(inner + mu * spring),
        "stroke": np.array([0.0, 0.0, -mu]),
    }
    return tops[response], bottom


def _squared_magnitude(coefficients: FloatArray) -> FloatArray:
    """|P(j r)|^2 as a polynomial in r^2."""
    signs = (-1.0) ** np.arange((coefficients.size + 1) // 2)
    even = coefficients[::2] * signs
    odd = coefficients[1::2] * signs[: coefficients[1::2].size]
    square: FloatArray = np.asarray(polynomial.polymul(even, even))
    if odd.size:
        turned = polynomial.polymul([0.0, 1.0], polynomial.polymul(odd, odd))
        square = np.asarray(polynomial.polyadd(square, turned))
    return square


def _least(cost: Callable[[float, float], float], mass_ratio: float) -> AbsorberTuning:
    """Least cost over f and z2: the best f for each z2 first, then the best z2."""
    from scipy.optimize import minimize_scalar

    low, high = 0.5 / (1.0 + mass_ratio), 1.3
    most = min(2.0, 3.0 * _root(mass_ratio) + 0.3)

    def tuned(damping_ratio: float) -> tuple[float, float]:
        found = minimize_scalar(
            lambda f: cost(f, damping_ratio), bounds=(low, high), method="bounded", options={"xatol": 1e-9}
        )
        return float(found.fun), float(found.x)

    best = minimize_scalar(
        lambda z: tuned(z)[0], bounds=(1e-4, most), method="bounded", options={"xatol": 1e-8}
    )
    reached, frequency = tuned(float(best.x))
    return AbsorberTuning(frequency, float(best.x), reached)
