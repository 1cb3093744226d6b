"""Random response: variance of linear responses to a power spectral density, and what it says of extremes.

The integral of |H|^2 S is taken between every break point of S and every boundary between two poles. Near a
pole with frequency c and half width h the variable is s in omega = c + h sinh(s): in s the resonance is as
smooth as everything else, so the number of points does not grow as the damping falls. Each panel carries a
Gauss and a Kronrod rule; panels whose two rules disagree are halved until the tolerance is met.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from detune.physics.array_types import ArrayLike, BoolArray, ComplexArray, FloatArray, IntArray
from detune.physics.spectra import PowerSpectralDensity, segment_exponents

Transfer = Callable[[FloatArray], ComplexArray]
Rule = tuple[FloatArray, FloatArray, FloatArray]

# Gauss 7 inside Kronrod 15, and Gauss 3 inside Kronrod 7 (R. Piessens et al., QUADPACK, 1983).
KRONROD_15 = (
    (0.0, 0.209482141084727828012999174891714, 0.417959183673469387755102040816327),
    (0.207784955007898467600689403773245, 0.204432940075298892414161999234649, 0.0),
    (
        0.405845151377397166906606412076961,
        0.190350578064785409913256402421014,
        0.381830050505118944950369775488975,
    ),
    (0.586087235467691130294144691693013, 0.169004726639267902826583426598550, 0.0),
    (
        0.741531185599394439863864773280788,
        0.140653259715525918745189590510238,
        0.279705391489276667901467771423780,
    ),
    (0.864864423359769072789712788640926, 0.104790010322250183839876322541518, 0.0),
    (
        0.949107912342758524526189684047851,
        0.063092092629978553290700663189204,
        0.129484966168869693270611432679082,
    ),
    (0.991455371120812639206854697526329, 0.022935322010529224963732008058970, 0.0),
)
KRONROD_7 = (
    (0.0, 0.450916538658474142345110087045571, 0.888888888888888888888888888888889),
    (0.434243749346802558002071502844628, 0.401397414775962222905051818618432, 0.0),
    (
        0.774596669241483377035853079956480,
        0.268488089868333440728569280666710,
        0.555555555555555555555555555555556,
    ),
    (0.960491268708020283423507092629080, 0.104656226026467265193823857192073, 0.0),
)


def _mirrored(half: tuple[tuple[float, float, float], ...]) -> Rule:
    """Nodes, Kronrod weights and Gauss weights on [-1, 1] from the half with nodes not below zero."""
    node, kronrod, gauss = np.array(half).T
    return (
        np.r_[-node[:0:-1], node],
        np.r_[kronrod[:0:-1], kronrod],
        np.r_[gauss[:0:-1], gauss],
    )


LONG_RULE = _mirrored(KRONROD_15)
SHORT_RULE = _mirrored(KRONROD_7)
LONGEST_PANEL = 4.0
SHORT_PANEL = 0.7
MOST_HALVINGS = 12


class QuadratureNotConverged(ArithmeticError):
    """The response has a feature that the given poles do not announce and halving did not resolve."""


def variance(
    transfer: Transfer,
    spectrum: PowerSpectralDensity,
    centres: ArrayLike,
    half_widths: ArrayLike,
    tolerance: float = 1e-4,
    with_rates: bool = False,
) -> FloatArray:
    """Mean square (R, D) of R responses for D designs: integral of |H(2 pi f)|^2 S(f) df over the spectrum.

    transfer: omega (D, F) in rad/s -> complex H (R, D, F), response per unit of the input whose density is
    given; it is called a few times with different F. spectrum: one for all designs, in (unit)^2/Hz. centres,
    half_widths (D, m): imaginary part and decay rate in rad/s of the poles, -half_width + j centre; a pole
    that does not oscillate has centre 0. Rough values cost points and not accuracy, but every lightly damped
    pole in the band must be among them: a needle that nobody announces can stand between all points.
    tolerance: relative, on the estimated error of each response. with_rates: after the R mean squares come
    those of the responses' rates, the integrals of |omega H|^2 S, so that (2R, D) is returned. Raises
    ValueError for a half width that is not above zero (an undamped resonance has no variance), and
    QuadratureNotConverged.
    """
    centre, width = _poles(spectrum, centres, half_widths)
    panels = _first_panels(spectrum, centre, width)
    value, error = _panel_integrals(transfer, spectrum, centre, width, panels, with_rates)
    for _ in range(MOST_HALVINGS):
        total, late = _judge(panels, value, error, centre.shape[0], tolerance)
        if not np.any(late):
            return total
        kept, fine = panels.chosen(~late), panels.chosen(late).halved()
        fine_value, fine_error = _panel_integrals(transfer, spectrum, centre, width, fine, with_rates)
        panels = kept.joined(fine)
        value = np.concatenate([value[:, ~late], fine_value], axis=1)
        error = np.concatenate([error[:, ~late], fine_error], axis=1)
    total, late = _judge(panels, value, error, centre.shape[0], tolerance)
    if np.any(late):
        designs = np.unique(panels.design[late])[:5].tolist()
        raise QuadratureNotConverged(f"the variance of designs {designs} did not reach {tolerance:g}")
    return total


@dataclass(frozen=True, eq=False)
class _Panels:
    """Panels (P,): the design each belongs to, the pole that gives its variable, its ends in that
    variable.
    """

    design: IntArray
    owner: IntArray
    low: FloatArray
    high: FloatArray

    def chosen(self, mask: BoolArray) -> _Panels:
        return _Panels(self.design[mask], self.owner[mask], self.low[mask], self.high[mask])

    def halved(self) -> _Panels:
        middle = 0.5 * (self.low + self.high)
        first = _Panels(self.design, self.owner, self.low, middle)
        return first.joined(_Panels(self.design, self.owner, middle, self.high))

    def joined(self, other: _Panels) -> _Panels:
        return _Panels(
            np.concatenate([self.design, other.design]),
            np.concatenate([self.owner, other.owner]),
            np.concatenate([self.low, other.low]),
            np.concatenate([self.high, other.high]),
        )


def _poles(
    spectrum: PowerSpectralDensity, centres: ArrayLike, half_widths: ArrayLike
) -> tuple[FloatArray, FloatArray]:
    """Centres and half widths (D, m + 1): the given poles, and one at zero for the branch point of power
    laws.
    """
    centre = np.atleast_2d(np.asarray(centres, dtype=float))
    width = np.atleast_2d(np.asarray(half_widths, dtype=float))
    if centre.shape != width.shape or centre.ndim != 2:
        raise ValueError("centres and half widths of the poles have the same shape (designs, poles)")
    if not np.all(np.isfinite(centre)) or not np.all(np.isfinite(width) & (width > 0.0)):
        raise ValueError("every pole needs a half width above zero: an undamped resonance has no variance")
    lowest = 2.0 * np.pi * spectrum.frequency[0]
    origin = np.zeros((centre.shape[0], 1))
    return np.hstack([np.abs(centre), origin]), np.hstack([width, origin + 0.5 * lowest])


def _first_panels(spectrum: PowerSpectralDensity, centre: FloatArray, width: FloatArray) -> _Panels:
    """Panels between all break points and all boundaries between nearest poles, none longer than
    LONGEST_PANEL.
    """
    corner = 2.0 * np.pi * np.unique(spectrum.frequency)
    boundary = np.clip(_lower_boundaries(centre, width), corner[0], corner[-1])
    edge = np.sort(np.hstack([boundary, np.broadcast_to(corner, (centre.shape[0], corner.size))]), axis=1)
    start, end = edge[:, :-1], edge[:, 1:]
    middle = 0.5 * (start + end)
    owner = np.argmin((middle[..., None] - centre[:, None, :]) ** 2 + width[:, None, :] ** 2, axis=-1)
    near = np.take_along_axis(centre, owner, axis=1)
    scale = np.take_along_axis(width, owner, axis=1)
    low, high = np.arcsinh((start - near) / scale), np.arcsinh((end - near) / scale)
    count = np.ceil((high - low) / LONGEST_PANEL).astype(np.int64).ravel()
    design = np.repeat(np.arange(centre.shape[0]), edge.shape[1] - 1)
    place = np.arange(int(count.sum())) - np.repeat(np.cumsum(count) - count, count)
    length = np.repeat(((high - low).ravel() / np.maximum(count, 1)), count)
    begin = np.repeat(low.ravel(), count) + place * length
    return _Panels(np.repeat(design, count), np.repeat(owner.ravel(), count), begin, begin + length)


def _lower_boundaries(centre: FloatArray, width: FloatArray) -> FloatArray:
    """Lower end (D, m) of the frequencies to which each pole -width + j centre is the nearest of all
    poles.
    """
    square = centre**2 + width**2
    gap = centre[:, :, None] - centre[:, None, :]
    with np.errstate(divide="ignore", invalid="ignore"):
        crossing = 0.5 * (square[:, :, None] - square[:, None, :]) / gap
    return np.asarray(np.max(np.where(gap > 0.0, crossing, -np.inf), axis=2))


def _panel_integrals(
    transfer: Transfer,
    spectrum: PowerSpectralDensity,
    centre: FloatArray,
    width: FloatArray,
    panels: _Panels,
    with_rates: bool,
) -> tuple[FloatArray, FloatArray]:
    """Kronrod integral and error estimate (R, P) of every panel, from one call of the transfer function."""
    short = panels.high - panels.low < SHORT_PANEL
    rules = [(np.flatnonzero(~short), LONG_RULE), (np.flatnonzero(short), SHORT_RULE)]
    blocks = [_nodes(panels, chosen, rule, centre, width) for chosen, rule in rules]
    design = np.concatenate([np.repeat(panels.design[chosen], rule[0].size) for chosen, rule in rules])
    omega = np.concatenate([nodes.ravel() for nodes, _ in blocks])
    column, most = _columns(design, centre.shape[0])
    # Rows shorter than the longest are filled up with a frequency of the spectrum that counts nowhere.
    grid = np.full((centre.shape[0], most), 2.0 * np.pi * spectrum.frequency[0])
    grid[design, column] = omega
    response = np.asarray(transfer(grid))[:, design, column]
    power = (response.real**2 + response.imag**2) * _density(spectrum, omega)
    if with_rates:
        power = np.concatenate([power, power * omega**2])
    value = np.empty((power.shape[0], panels.low.size))
    error = np.empty_like(value)
    offset = 0
    for (chosen, rule), (nodes, slope) in zip(rules, blocks, strict=True):
        part = power[:, offset : offset + nodes.size].reshape(power.shape[0], *nodes.shape) * slope
        offset += nodes.size
        kronrod, gauss = part @ rule[1], part @ rule[2]
        value[:, chosen] = kronrod
        error[:, chosen] = _kronrod_error(kronrod, np.abs(kronrod - gauss))
    return value, error


def _nodes(
    panels: _Panels, chosen: IntArray, rule: Rule, centre: FloatArray, width: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Frequencies (P', q) of a rule's nodes, and d frequency in Hz over d node (P', q)."""
    half = 0.5 * (panels.high[chosen] - panels.low[chosen])[:, None]
    variable = 0.5 * (panels.high[chosen] + panels.low[chosen])[:, None] + half * rule[0]
    near = centre[panels.design[chosen], panels.owner[chosen]][:, None]
    scale = width[panels.design[chosen], panels.owner[chosen]][:, None]
    return near + scale * np.sinh(variable), half * scale * np.cosh(variable) / (2.0 * np.pi)


def _columns(design: IntArray, count: int) -> tuple[IntArray, int]:
    """A column for each node so that nodes of one design stand in one row; and the length of the longest
    row.
    """
    order = np.argsort(design, kind="stable")
    each = np.bincount(design, minlength=count)
    column = np.empty_like(design)
    column[order] = np.arange(design.size) - np.repeat(np.cumsum(each) - each, each)
    return column, int(each.max())


def _density(spectrum: PowerSpectralDensity, omega: FloatArray) -> FloatArray:
    """Density in (unit)^2/Hz at nodes inside segments, where a vertical step cannot be met."""
    points = spectrum.frequency
    frequency = omega / (2.0 * np.pi)
    piece = np.clip(np.searchsorted(points, frequency, side="right") - 1, 0, points.size - 2)
    return np.asarray(
        spectrum.density[piece] * (frequency / points[piece]) ** segment_exponents(spectrum)[piece]
    )


def _kronrod_error(kronrod: FloatArray, difference: FloatArray) -> FloatArray:
    """Error of the Kronrod rule from its distance to the Gauss rule inside it.

    Where both converge geometrically the better rule's error is about the 1.6th power of the other's.
    """
    safe = np.where(kronrod > 0.0, kronrod, 1.0)
    relative = difference / safe
    return np.asarray(np.where(kronrod > 0.0, kronrod * np.minimum(relative, (10.0 * relative) ** 1.5), 0.0))


def _judge(
    panels: _Panels, value: FloatArray, error: FloatArray, designs: int, tolerance: float
) -> tuple[FloatArray, BoolArray]:
    """Totals (R, D), and the panels (P,) to halve: the worse half of those of a design that is not
    accurate enough.
    """
    total = _summed(value, panels.design, designs)
    wrong = _summed(error, panels.design, designs) > tolerance * total
    each = np.bincount(panels.design, minlength=designs)
    share = 0.5 * tolerance * total / np.maximum(each, 1)
    late = wrong[:, panels.design] & (error > share[:, panels.design])
    return total, np.asarray(np.any(late, axis=0))


def _summed(values: FloatArray, design: IntArray, designs: int) -> FloatArray:
    return np.stack([np.bincount(design, weights=row, minlength=designs) for row in values])
