"""The checker's own bound of an output over boxes, with all rounding accounted for.

Works from a record's plain data. W is any invertible matrix: with D~ = W D W^T, c~ = W c, f~ = W f the output is
c~^T D~^-1 f~. D~ = D0~ + E~ where every e_i P_i of E has |e_i| <= rho_i, so ||E~|| <= ||W (sum rho_i |P_i|) W^T||.
The approximate singular value decomposition D0~ = U S V^H + rest has its error measured and added to the radius of
the ball. Mass terms that are not provably semidefinite are covered by the diagonal of their absolute row sums.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from detune.proof.checker_arithmetic import (
    OUTWARD,
    UNIT,
    Ball,
    Matrix,
    exact,
    fractions,
    frobenius,
    off_identity,
    positive_pivots,
    product,
    scaled,
    total,
)

SHIFTS = (0.0, 0.2, 0.3, 0.6, 1.0, 2.0, 3.0, 6.0, 10.0)


def array(data: Any) -> Matrix:
    """Array from plain data: nested lists, or re and im."""
    if isinstance(data, dict):
        return array(data["re"]) + 1j * array(data["im"])
    return np.array(data, dtype=np.float64)


def read_system(data: dict[str, Any]) -> dict[str, Matrix]:
    """Arrays of a record's system, with the covers |P| of all terms; raises ValueError for unusable data."""
    system = {name: array(values) for name, values in data.items()}
    n = system["mass"].shape[0]
    system["axes"] = system["axes"].reshape(-1, n)
    system["mass_terms"] = system["mass_terms"].reshape(-1, n, n)
    for name in ("stiffness_variable", "damping_variable", "mass_variable"):
        system[name] = system[name].astype(np.int64)
    for name in ("stiffness", "loss", "viscous"):
        if (system[name] < 0.0).any():
            raise ValueError(f"{name} is negative")
    for name in ("mass", "fixed_dynamic", "fixed_hysteretic", "fixed_viscous"):
        if not (system[name] == system[name].T).all():
            raise ValueError(f"{name} is not symmetric")
    if positive_pivots(fractions(system["mass"].tolist()))[2] != n:
        raise ValueError("mass is not positive definite")
    outer = np.einsum("ai,aj->aij", system["axes"], system["axes"])
    plain_terms = [*system["mass_terms"], system["mass"], system["fixed_viscous"]]
    system["terms"] = np.concatenate([outer, np.stack(plain_terms)])
    system["covers"] = np.concatenate([outer, np.stack([cover(term) for term in plain_terms])])
    return system


def cover(term: Matrix) -> Matrix:
    """A matrix G with |u^H P v| <= sqrt(u^H G u) sqrt(v^H G v): P itself if semidefinite, else absolute row sums."""
    negative, _, _ = positive_pivots(fractions(term.tolist()))
    if negative == 0:
        return term
    return np.diag(np.abs(term).sum(axis=1) * OUTWARD)


def corner_values(system: dict[str, Matrix], low: Matrix, high: Matrix) -> tuple[Matrix, Matrix]:
    """Centres (N, T) of all varying scalars and their deviations (N, T, 8) at the corners."""
    ones = np.ones((low.shape[0], 1))
    corners = []
    for number in range(8):
        s_edge, t_edge, w_edge = (high if number >> bit & 1 else low for bit in range(3))
        s = np.concatenate([s_edge[:, :-1], ones], axis=1)
        t = np.concatenate([t_edge[:, :-1], ones], axis=1)[:, system["damping_variable"]]
        square = w_edge[:, -1:]
        omega = np.sqrt(square)
        k = s[:, system["stiffness_variable"]]
        kappa = k * system["stiffness"] + 1j * t * (k * system["loss"] + omega * system["viscous"])
        masses = -square * s[:, system["mass_variable"]]
        corners.append(np.concatenate([kappa, masses, -square, omega], axis=1))
    values = np.stack(corners, axis=2)
    centre = values.mean(axis=2)
    return centre, values - centre[:, :, None]


def upper_bounds(system: dict[str, Matrix], output: dict[str, Any], low: Matrix, high: Matrix) -> Matrix:
    """Rigorous upper bounds (N,) of the output over boxes low, high (N, V+1)."""
    count, axes = low.shape[0], system["axes"].shape[0]
    centre, deviation = corner_values(system, low, high)
    # Corner values and centres are off by a few units of rounding: that goes into the radius.
    rho = (np.abs(deviation).max(axis=2) + 64.0 * UNIT * np.abs(centre) * 2.0) * OUTWARD
    kappa, kappa_rho = centre[:, :axes], rho[:, :axes]
    d0, spread = assembled(system, centre, rho)
    n = system["mass"].shape[0]
    weight, pad = inverse_factor(spread[0], system["mass"], high)
    spread = total(spread, scaled(exact(system["mass"]), pad[:, None, None]))
    w, wt = exact(weight), exact(np.swapaxes(weight, 1, 2))
    reach = frobenius(
        total(product(product(w, spread), wt), exact(-np.broadcast_to(np.eye(n), weight.shape)))
    )
    gamma = (1.0 + reach) * OUTWARD
    matrix = product(product(w, d0), wt)
    base, force = array(output["base"]), array(output["force"])
    moving, forced = np.flatnonzero(base != 0.0), np.flatnonzero(force != 0.0)
    axis_rows = exact(np.broadcast_to(system["axes"].astype(complex), (count, *system["axes"].shape)))
    load = total(
        exact(np.broadcast_to(array(output["load"])[None, :], (count, n))[:, None, :]),
        product(scaled(exact((kappa * 1.0)[:, None, :]), base), axis_rows),
    )
    row = total(
        exact(np.broadcast_to(array(output["row"])[None, :], (count, n))[:, None, :]),
        product(scaled(exact((kappa * 1.0)[:, None, :]), force), axis_rows),
    )
    right = product(w, stack_columns(load, axis_rows, moving))
    left = product(w, stack_columns(row, axis_rows, forced))
    start = (kappa * force * base).sum(axis=1)
    start_error = 64.0 * UNIT * (np.abs(kappa * force * base)).sum(axis=1) * (1 + axes)
    best = np.full(count, np.inf)
    for turn in turns(kappa):
        turned = deviation * turn[:, None, None]
        turned[:, -1] *= 1j
        lean = np.abs(turned.imag).max(axis=2) + 64.0 * UNIT * 2.0 * np.abs(centre)
        sine = np.minimum((lean / np.maximum(rho, 1e-300)).max(axis=1) * OUTWARD, 1.0)
        for shift in SHIFTS:
            radius = np.sqrt(gamma**2 + 2.0 * shift * sine * gamma + shift**2) * OUTWARD
            tilted = scaled(matrix, turn[:, None, None])
            tilted = total(tilted, exact(np.broadcast_to(1j * shift * np.eye(n), tilted[0].shape)))
            middle, reach_out = entries(tilted, left, right, radius)
            found = combine(
                output,
                middle * turn[:, None, None],
                reach_out,
                kappa_rho,
                start,
                start_error,
                moving,
                forced,
                low,
                high,
            )
            best = np.minimum(best, found)
    return best


def assembled(system: dict[str, Matrix], centre: Matrix, rho: Matrix) -> tuple[Ball, Ball]:
    """Enclosures of D at the centres (N, T) and of the cover sum rho |P|."""
    factor = centre.astype(complex)
    factor[:, -1] *= 1j
    fixed = system["fixed_dynamic"] + 1j * system["fixed_hysteretic"]
    shape = (centre.shape[0], *fixed.shape)
    d0: Ball = (np.broadcast_to(fixed, shape), np.zeros(shape))
    spread: Ball = exact(np.zeros(shape))
    for t, (term, own) in enumerate(zip(system["terms"], system["covers"], strict=True)):
        # Outer products b b^T were rounded once.
        d0 = total(d0, scaled((term, 2.0 * UNIT * np.abs(term)), factor[:, t, None, None]))
        spread = total(spread, scaled((own, 2.0 * UNIT * np.abs(own)), rho[:, t, None, None]))
    return d0, spread


def inverse_factor(spread: Matrix, mass: Matrix, high: Matrix) -> tuple[Matrix, Matrix]:
    """Approximate W with W (spread + pad mass) W^T = I, and the small pad (N,); any W and pad >= 0 serve."""
    trace = np.einsum("bii->b", spread) / np.trace(mass)
    pad = 1e-7 * np.maximum(trace, 1e-6 * high[:, -1])
    padded = spread + pad[:, None, None] * mass
    return np.linalg.inv(np.linalg.cholesky(padded)), pad


def stack_columns(first: Ball, rows: Ball, index: Matrix) -> Ball:
    """Columns (N, n, 1 + K): a vector (N, 1, n) and some of the rows (N, A, n)."""
    middle = np.concatenate([first[0], rows[0][:, index]], axis=1)
    radius = np.concatenate([first[1], rows[1][:, index]], axis=1)
    return np.swapaxes(middle, 1, 2), np.swapaxes(radius, 1, 2)


def turns(kappa: Matrix) -> list[Matrix]:
    """Unit numbers (N,) to rotate by: none, and minus the mean loss angle."""
    plain = np.ones(kappa.shape[0], dtype=complex)
    mean = kappa.sum(axis=1).conj() if kappa.shape[1] else plain
    size = np.maximum(np.abs(mean), 1e-300)
    # A number a hair shorter than 1 does not lengthen the radius.
    return [plain, mean / size * (1.0 - 8.0 * UNIT)]


def entries(matrix: Ball, left: Ball, right: Ball, radius: Matrix) -> tuple[Matrix, Matrix]:
    """Centre (N, C, F) and radius of left^T (matrix + ball of the radius)^-1 right; inf where not bounded."""
    u, sigma, vh = np.linalg.svd(matrix[0])
    v = np.swapaxes(vh.conj(), 1, 2)
    slack_u, slack_v = off_identity(u), off_identity(v)
    rebuilt = product(scaled(exact(u), sigma[:, None, :]), exact(vh))
    rest = frobenius(total(matrix, (-rebuilt[0], rebuilt[1])))
    # The nearest unitary matrices differ from u and v by no more than their slack.
    reach = (radius + rest + 2.0 * (slack_u + slack_v) * sigma[:, 0]) * OUTWARD
    bounded = (sigma[:, -1] > reach * (1.0 + 1e-9)) & (slack_u < 1e-6) & (slack_v < 1e-6)
    gap = np.where(bounded[:, None], (sigma - reach[:, None]) * (sigma + reach[:, None]), 1.0) / OUTWARD
    a, a_radius = product((np.swapaxes(left[0], 1, 2), np.swapaxes(left[1], 1, 2)), exact(v))
    f, f_radius = product(exact(np.swapaxes(u.conj(), 1, 2)), right)
    a_radius = a_radius + (slack_v * frobenius(left))[:, None, None]
    f_radius = f_radius + (slack_u * frobenius(right))[:, None, None]
    share = sigma / gap
    middle = (a * share[:, None, :]) @ f
    a_most, f_most = np.abs(a) + a_radius, np.abs(f) + f_radius
    error = (a_most * share[:, None, :]) @ f_most - (np.abs(a) * share[:, None, :]) @ np.abs(f)
    error = np.maximum(error, 0.0) + 1e-11 * ((a_most * share[:, None, :]) @ f_most)
    row = np.sqrt((a_most**2 / gap[:, None, :]).sum(axis=2))
    column = np.sqrt((f_most**2 / gap[:, :, None]).sum(axis=1))
    out = (reach[:, None, None] * row[:, :, None] * column[:, None, :] + error) * OUTWARD
    return middle, np.where(bounded[:, None, None], out, np.inf)


def combine(
    output: dict[str, Any],
    middle: Matrix,
    radius: Matrix,
    rho: Matrix,
    start: Matrix,
    start_error: Matrix,
    moving: Matrix,
    forced: Matrix,
    low: Matrix,
    high: Matrix,
) -> Matrix:
    """Upper bound (N,) of the output from the entries for all rows and loads."""
    base, force = array(output["base"]), array(output["force"])
    offset = array(output["offset"]) if isinstance(output["offset"], dict) else output["offset"]
    sway = rho[:, moving] * np.abs(base[moving])
    extra = ((np.abs(middle[:, :, 1:]) + radius[:, :, 1:]) * sway[:, None, :]).sum(axis=2)
    main = np.abs(middle[:, 0, 0] - start - offset) + radius[:, 0, 0] + extra[:, 0] + start_error
    for position, axis in enumerate(forced):
        own = (
            np.abs(middle[:, 1 + position, 0] - base[axis])
            + radius[:, 1 + position, 0]
            + extra[:, 1 + position]
        )
        main = main + np.abs(force[axis]) * rho[:, axis] * own
    power = output["load_power"] + output["output_power"]
    edge = high[:, -1] if power >= 0.0 else low[:, -1]
    bound = main * np.sqrt(edge) ** power * (1.0 + 1e-11)
    return np.where(np.isnan(bound), np.inf, bound)
