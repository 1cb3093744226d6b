"""Harmonic response of designs in blocks of 64 at one frequency: text that is compiled like `block_rules.py`.

Both parts of a complex number are kept in separate real arrays. The computation is that of `response_rows.py`.
"""

from __future__ import annotations

import numpy as np

from detune.proof.block_reference import complex_block
from detune.proof.selection_data import Floats, Integers

# --- compiled below ---


def case_block(
    dynamic: Floats,
    outer: Floats,
    stations: Floats,
    counts: Floats,
    kappa_re: Floats,
    kappa_im: Floats,
    load_re: Floats,
    load_im: Floats,
    drive_re: Floats,
    drive_im: Floats,
    driven: bool,
    rows: Floats,
    row_limit: Floats,
    deflection_limit: Floats,
    force_limit: Floats,
    total: Floats,
    total_limit: Floats,
    margin: Floats,
    good: Floats,
    work: Floats,
) -> None:
    """Least limit/response - 1 of 64 designs at one frequency into margin; good 0 where the solve is doubtful.

    dynamic ((2m+4n+1)*64): packed -omega^2 M + fixed stiffness per lane, real then imaginary; the springs are
    added to it, and the solution is left behind it.
    outer (S*3, m): packed b b^T, parallel count included. stations (S*3, n). counts (S*3,).
    kappa_re, kappa_im (S*3, 64): stiffness of one part. drive (S*3,): base displacement. Limits flat.
    """
    n, m = stations.shape[1], outer.shape[1]
    add_springs(dynamic, outer, kappa_re, kappa_im)
    f, q = dynamic[2 * m * 64 : (2 * m + 2 * n) * 64], dynamic[(2 * m + 2 * n) * 64 : (2 * m + 4 * n) * 64]
    f_re, f_im, q_re, q_im = f[: n * 64], f[n * 64 :], q[: n * 64], q[n * 64 :]
    fill_load(f_re, f_im, load_re, load_im)
    if driven:
        add_drive(f_re, f_im, stations, counts, kappa_re, kappa_im, drive_re, drive_im)
    complex_block(dynamic)
    good[:] = dynamic[(2 * m + 4 * n) * 64 :]
    ratio, re_sum, im_sum = work[2, :64], work[3, :64], work[4, :64]
    for b in range(64):
        ratio[b] = 0.0
    for r in range(rows.shape[0]):
        project(rows[r], q_re, q_im, re_sum, im_sum)
        worst_ratio(re_sum, im_sum, row_limit[r], ratio)
    station_ratios(
        stations, counts, kappa_re, kappa_im, q_re, q_im, drive_re, drive_im,
        deflection_limit, force_limit, total, total_limit, work, ratio,
    )  # fmt: skip
    for b in range(64):
        margin[b] = 1.0 / np.sqrt(ratio[b]) - 1.0 if ratio[b] > 0.0 else np.inf


def station_ratios(
    stations: Floats,
    counts: Floats,
    kappa_re: Floats,
    kappa_im: Floats,
    q_re: Floats,
    q_im: Floats,
    drive_re: Floats,
    drive_im: Floats,
    deflection_limit: Floats,
    force_limit: Floats,
    total: Floats,
    total_limit: Floats,
    work: Floats,
    ratio: Floats,
) -> None:
    """Raise ratio to that of deflections b q - u and forces kappa (b q - u) of all axes, and of total forces."""
    re_sum, im_sum, total_re, total_im = work[3, :64], work[4, :64], work[5], work[6]
    total_re[:] = 0.0
    total_im[:] = 0.0
    for a in range(stations.shape[0]):
        project(stations[a], q_re, q_im, re_sum, im_sum)
        for b in range(64):
            re_sum[b] -= drive_re[a]
            im_sum[b] -= drive_im[a]
        worst_ratio(re_sum, im_sum, deflection_limit[a], ratio)
        for b in range(64):
            re = kappa_re[a, b] * re_sum[b] - kappa_im[a, b] * im_sum[b]
            im_sum[b] = kappa_re[a, b] * im_sum[b] + kappa_im[a, b] * re_sum[b]
            re_sum[b] = re
        worst_ratio(re_sum, im_sum, force_limit[a], ratio)
        for t in range(total.shape[0]):
            factor = total[t, a] * counts[a]
            if factor != 0.0:
                for b in range(64):
                    total_re[t * 64 + b] += factor * re_sum[b]
                    total_im[t * 64 + b] += factor * im_sum[b]
    for t in range(total.shape[0]):
        worst_ratio(total_re[t * 64 : t * 64 + 64], total_im[t * 64 : t * 64 + 64], total_limit[t], ratio)


def add_springs(dynamic: Floats, outer: Floats, kappa_re: Floats, kappa_im: Floats) -> None:
    """Add kappa b b^T of all axes to the packed blocks, real then imaginary."""
    m = outer.shape[1]
    for a in range(outer.shape[0]):
        re, im = kappa_re[a], kappa_im[a]
        for k in range(m):
            factor = outer[a, k]
            if factor != 0.0:
                block_re = dynamic[k * 64 : k * 64 + 64]
                block_im = dynamic[(m + k) * 64 : (m + k) * 64 + 64]
                for b in range(64):
                    block_re[b] += factor * re[b]
                    block_im[b] += factor * im[b]


def fill_load(f_re: Floats, f_im: Floats, load_re: Floats, load_im: Floats) -> None:
    """The same load in all lanes."""
    for i in range(load_re.shape[0]):
        for b in range(64):
            f_re[i * 64 + b] = load_re[i]
            f_im[i * 64 + b] = load_im[i]


def add_drive(
    f_re: Floats,
    f_im: Floats,
    stations: Floats,
    counts: Floats,
    kappa_re: Floats,
    kappa_im: Floats,
    drive_re: Floats,
    drive_im: Floats,
) -> None:
    """Add count b kappa u of all axes to the load."""
    for a in range(stations.shape[0]):
        for i in range(stations.shape[1]):
            factor = stations[a, i] * counts[a]
            if factor != 0.0:
                for b in range(64):
                    re, im = kappa_re[a, b], kappa_im[a, b]
                    f_re[i * 64 + b] += factor * (re * drive_re[a] - im * drive_im[a])
                    f_im[i * 64 + b] += factor * (re * drive_im[a] + im * drive_re[a])


def project(row: Floats, q_re: Floats, q_im: Floats, re_sum: Floats, im_sum: Floats) -> None:
    """row q of 64 lanes."""
    for b in range(64):
        re_sum[b] = 0.0
        im_sum[b] = 0.0
    for i in range(row.shape[0]):
        factor = row[i]
        if factor != 0.0:
            for b in range(64):
                re_sum[b] += factor * q_re[i * 64 + b]
                im_sum[b] += factor * q_im[i * 64 + b]


def worst_ratio(re: Floats, im: Floats, limit: float, ratio: Floats) -> None:
    """Raise ratio to the squared response over the squared limit; a limit of +inf does nothing."""
    if limit < 1.0e300:
        scale = 1.0 / (limit * limit) if limit > 0.0 else 1.0e300
        for b in range(64):
            ratio[b] = max(ratio[b], (re[b] * re[b] + im[b] * im[b]) * scale)


def batch_margin(
    omega: float,
    mass: Floats,
    fixed_re: Floats,
    fixed_im: Floats,
    outer: Floats,
    stations: Floats,
    counts: Floats,
    axis_group: Integers,
    group_start: Integers,
    stiffness: Floats,
    loss: Floats,
    viscous: Floats,
    designs: Integers,
    load_re: Floats,
    load_im: Floats,
    drive_re: Floats,
    drive_im: Floats,
    driven: bool,
    rows: Floats,
    row_limit: Floats,
    deflection_limit: Floats,
    force_limit: Floats,
    total: Floats,
    total_limit: Floats,
    margin: Floats,
    good: Floats,
) -> None:
    """Margins (D,) of one load case; good (D,) is 0 where the solve must be repeated by the reference.

    mass (B, m), fixed (m,) packed. stiffness, loss, viscous (all parts, 3): the groups one after another, group g
    from group_start[g] on. axis_group (S*3,): group of each axis row.
    """
    m, n, axes = fixed_re.shape[0], stations.shape[1], stations.shape[0]
    dynamic = np.empty((2 * m + 4 * n + 1) * 64)
    kappa_re, kappa_im = np.empty((axes, 64)), np.empty((axes, 64))
    block_margin, block_good = np.empty(64), np.empty(64)
    work = np.empty((7, max(1, total.shape[0]) * 64))
    last = designs.shape[1] - 1
    for start in range(0, designs.shape[0], 64):
        width = min(64, designs.shape[0] - start)
        for b in range(64):
            d = start + min(b, width - 1)
            step = designs[d, last]
            for k in range(m):
                dynamic[k * 64 + b] = fixed_re[k] - omega * omega * mass[step, k]
                dynamic[(m + k) * 64 + b] = fixed_im[k]
            for a in range(axes):
                p = group_start[axis_group[a]] + designs[d, axis_group[a]]
                kappa_re[a, b] = stiffness[p, a % 3]
                kappa_im[a, b] = loss[p, a % 3] + omega * viscous[p, a % 3]
        case_block(
            dynamic, outer, stations, counts, kappa_re, kappa_im, load_re, load_im,
            drive_re, drive_im, driven, rows, row_limit, deflection_limit, force_limit,
            total, total_limit, block_margin, block_good, work,
        )  # fmt: skip
        for b in range(width):
            margin[start + b] = block_margin[b]
            good[start + b] = block_good[b]
