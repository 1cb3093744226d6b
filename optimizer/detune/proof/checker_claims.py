"""The checker's view of a selection over scatter: response, static and separation entries, candidates and
the winner.
"""

from __future__ import annotations

import itertools
from fractions import Fraction
from typing import Any

import numpy as np

from detune.proof.checker_arithmetic import OUTWARD, UNIT, Matrix, fractions
from detune.proof.checker_boxes import array
from detune.proof.checker_designs import PI_HIGH, PI_LOW, count_below, number
from detune.proof.checker_lines import Line, length_plane, plus, scaled, times, variable_product
from detune.proof.checker_scatter import least_eigenvalue, read_rows, read_scatter, row_bounds
from detune.proof.checker_witness import exact_rows

BATCH = 256
DEEPEST = 6
MOST_OPEN = 4096
MOST_STATIC = 40_000
Cut = Any


def check_response(data: dict[str, Any], rebuild: Cut, halve: Cut) -> tuple[list[str], int]:
    """Faults of a decided family of response rows, and the number of boxes bounded."""
    decision, rows, system = data["decision"], read_rows(data["limits"]), read_scatter(data["system"])
    statuses = decision["status"]
    if len(statuses) != len(rows["limit"]) or len(data["labels"]) != len(statuses):
        return ["statuses, labels and rows do not fit together"], 0
    if "violated" in statuses:
        return check_witness(data, system, rows, statuses), 0
    if any(status != "proven" for status in statuses):
        return [], 0
    first, last = (number(f) for f in data["limits"]["speed"])
    if not 0.0 < first <= last:
        return ["the speed interval is empty"], 0
    # The whole box a hair wider, so that rounding of the squared speed cuts nothing off.
    low = np.append(system["low"], (2.0 * np.pi * first) ** 2 * (1.0 - 16.0 * UNIT))
    high = np.append(system["high"], (2.0 * np.pi * last) ** 2 * (1.0 + 16.0 * UNIT))
    leaves = rebuild(low, high, decision["splits"])
    if leaves is None:
        return ["the tree of boxes is not complete"], 0
    lows, highs = leaves
    count = 0
    for start in range(0, len(lows), BATCH):
        part_low, part_high = lows[start : start + BATCH], highs[start : start + BATCH]
        failed = np.ones(len(part_low), dtype=bool)
        for _ in range(DEEPEST + 1):
            bound = row_bounds(system, rows, part_low, part_high)
            count += len(part_low)
            failed = ~(bound <= rows["limit"]).all(axis=1)
            if not failed.any() or failed.sum() > MOST_OPEN:
                break
            part_low, part_high = halve(part_low[failed], part_high[failed])
        if failed.any():
            return [f"{int(failed.sum())} boxes could not be confirmed within the limits"], count
    return [], count


def check_witness(
    data: dict[str, Any], system: dict[str, Matrix], rows: dict[str, Any], statuses: list[str]
) -> list[str]:
    """Whether the points named break the limits of the rows called violated, and lie inside the scatter."""
    decision, faults = data["decision"], []
    for row, status in enumerate(statuses):
        if status != "violated":
            continue
        point, speed = decision["worst"][row], number(decision["speed"][row])
        inside = all(a <= x <= b for a, x, b in zip(system["low"], point, system["high"], strict=True))
        first, last = (number(f) for f in data["limits"]["speed"])
        if not inside or not first * (1.0 - 1e-12) <= speed <= last * (1.0 + 1e-12):
            faults.append(f"{data['labels'][row]}: the witness lies outside the scatter or the speed range")
        elif not exact_rows(system, rows, point, speed)[row] > rows["limit"][row]:
            faults.append(f"{data['labels'][row]}: the witness does not exceed the limit")
    return faults


def static_bounds(data: dict[str, Any], low: Matrix, high: Matrix) -> tuple[Matrix, Matrix]:
    """Rigorous enclosures (N, R) of static rows over boxes low, high (N, V)."""
    zero = np.zeros((len(low), 1))
    low, high = np.concatenate([low, zero], axis=1), np.concatenate([high, zero], axis=1)
    fixed, axes, loads, flat = (data[name] for name in ("fixed", "axes", "loads", "flat"))
    n, count = len(fixed), len(low)
    kappa = scaled(variable_product(low, high, data["factors"]), data["stiffness"])
    share = variable_product(low, high, data["load_factors"])
    rho = (kappa.reach() + kappa.rest) * OUTWARD
    outer = np.einsum("ai,aj->aij", axes, axes).reshape(-1, n * n)
    k0 = (kappa.centre @ outer).reshape(count, n, n) + fixed
    k0_radius = 1e-14 * ((np.abs(kappa.centre) @ np.abs(outer)).reshape(count, n, n) + np.abs(fixed))
    # K >= K0 - sum rho b b^T in the Loewner order; its least eigenvalue, scaled, bounds the inverse.
    scale = 1.0 / np.sqrt(np.einsum("bii->bi", k0))
    soft = k0 - (rho @ outer).reshape(count, n, n)
    unit = scale[:, :, None] * scale[:, None, :]
    radius = (k0_radius + 1e-14 * (rho @ np.abs(outer)).reshape(count, n, n)) * unit
    least = least_eigenvalue((soft * unit, radius + 1e-15 * np.abs(soft * unit)))
    nu = np.where(least > 0.0, (1.0 + 1e-12) / np.maximum(least, 1e-300), np.inf)
    q = np.linalg.solve(k0, (share.centre @ loads)[:, :, None])[:, :, 0]
    p = np.swapaxes(np.linalg.solve(k0, np.broadcast_to(flat.T, (count, *flat.T.shape))), 1, 2)
    p_axes, q_axes = p @ axes.T, q @ axes.T
    p_rough, q_rough = np.abs(p) @ np.abs(axes).T, np.abs(q) @ np.abs(axes).T
    weights = p_axes * q_axes[:, None, :]
    fuzz = 1e-13 * p_rough * q_rough[:, None, :]
    base = q @ flat.T - ((p @ fixed) * q[:, None, :]).sum(axis=2)
    rough = np.abs(q) @ np.abs(flat).T + ((np.abs(p) @ np.abs(fixed)) * np.abs(q)[:, None, :]).sum(axis=2)
    load_weights = p @ loads.T
    load_fuzz = 1e-13 * np.abs(p) @ np.abs(loads).T
    centre = (
        base
        + (load_weights * share.centre[:, None]).sum(axis=2)
        - (weights * kappa.centre[:, None]).sum(axis=2)
    )
    parts = load_weights @ share.parts - weights @ kappa.parts
    rest = (np.abs(load_weights) * share.rest[:, None]).sum(axis=2) + (
        np.abs(weights) * kappa.rest[:, None]
    ).sum(axis=2)
    sizes = (np.abs(load_weights) * share.size()[:, None]).sum(axis=2)
    sizes = sizes + (np.abs(weights) * kappa.size()[:, None]).sum(axis=2) + rough
    rest = (
        rest
        + (fuzz * kappa.size()[:, None]).sum(axis=2)
        + (load_fuzz * share.size()[:, None]).sum(axis=2)
        + 1e-12 * sizes
    )
    p_left = _static_left(flat[None], p, fixed, axes, kappa, rho, scale)
    q_left = _static_left((share.centre @ loads)[:, None], q[:, None], fixed, axes, kappa, rho, scale)[:, 0]
    moved = ((share.reach() + share.rest)[:, :, None] * np.abs(loads)).sum(axis=1)
    q_left = q_left + np.sqrt(((moved * scale) ** 2).sum(axis=1))
    with np.errstate(invalid="ignore"):
        rest = rest + nu[:, None] * p_left * q_left[:, None]
    return _static_rows(
        data, low, high, Line(centre, parts, np.where(np.isnan(rest), np.inf, rest) * OUTWARD)
    )


def _static_left(
    given: Matrix, x: Matrix, fixed: Matrix, axes: Matrix, kappa: Line, rho: Matrix, scale: Matrix
) -> Matrix:
    """|| S (given - K x) || (N, C) over the box, S the diagonal scaling."""
    bent = x @ axes.T
    centre = given - x @ fixed - (bent * kappa.centre[:, None]) @ axes
    rough = np.abs(given) + np.abs(x) @ np.abs(fixed)
    size = np.abs(x) @ np.abs(axes).T
    rough = rough + (size * np.abs(kappa.centre)[:, None]) @ np.abs(axes)
    spread = ((np.abs(bent) + 1e-13 * size) * rho[:, None]) @ np.abs(axes)
    whole = (np.abs(centre) + spread + 1e-12 * rough) * scale[:, None]
    return np.sqrt((whole**2).sum(axis=2)) * OUTWARD


def _static_rows(data: dict[str, Any], low: Matrix, high: Matrix, each: Line) -> tuple[Matrix, Matrix]:
    count, number = len(low), len(data["scale"])
    shift = np.zeros((number, 3))
    shift[:, 0] = data["shift"]
    each = plus(
        each, Line(np.broadcast_to(shift.reshape(-1), each.centre.shape), 0.0 * each.parts, 0.0 * each.centre)
    )
    factor = variable_product(low, high, data["row_factors"])
    wide = Line(*(np.repeat(v, 3, axis=1) for v in (factor.centre, factor.parts, factor.rest)))
    bounded = np.isfinite(each.rest)
    each = Line(each.centre, each.parts, np.where(bounded, each.rest, 0.0))
    each = scaled(times(each, wide), np.repeat(data["scale"], 3))
    shape = (count, number, 3)
    length = length_plane(
        each.centre.reshape(shape), each.parts.reshape(*shape, -1), each.rest.reshape(shape)
    ).size()
    around = (each.reach() + each.rest).reshape(shape)[:, :, 0] * OUTWARD
    middle = each.centre.reshape(shape)[:, :, 0]
    lower = np.where(data["length"], 0.0, middle - around)
    upper = np.where(data["length"], length, middle + around)
    whole = bounded.reshape(shape).all(axis=2)
    return np.where(whole, lower, -np.inf), np.where(whole, upper, np.inf)


def read_static(data: dict[str, Any]) -> dict[str, Any]:
    """Arrays of recorded static rows; raises ValueError for unusable data."""
    out: dict[str, Any] = {}
    for name in ("fixed", "axes", "stiffness", "loads", "rows", "scale", "shift", "low", "high"):
        out[name] = array(data[name])
    for name in ("lower", "upper"):
        out[name] = np.array([number(v) for v in data[name]])
    for name, width in (("factors", 2), ("load_factors", 3), ("row_factors", 2)):
        out[name] = array(data[name]).reshape(-1, width).astype(np.int64)
    out["length"] = np.array(data["length"], dtype=bool)
    out["flat"] = out["rows"].reshape(-1, len(out["fixed"]))
    if not (out["fixed"] == out["fixed"].T).all() or not (out["stiffness"] >= 0.0).all():
        raise ValueError("the static stiffness is not symmetric, or a spring is negative")
    return out


def check_static(data: dict[str, Any]) -> tuple[list[str], int]:
    """Faults of static rows: the enclosures claimed, and the limits, over boxes cut anew; violations at
    their points.
    """
    arrays = read_static(data["limits"])
    claimed = (
        np.array([number(v) for v in data["claimed_low"]]),
        np.array([number(v) for v in data["claimed_high"]]),
    )
    statuses = data["status"]
    if "violated" in statuses:
        return _static_witness(data, arrays, statuses), 0
    if any(status != "proven" for status in statuses):
        return [], 0
    need_low, need_high = np.maximum(arrays["lower"], claimed[0]), np.minimum(arrays["upper"], claimed[1])
    low, high, count = arrays["low"][None], arrays["high"][None], 0
    scale = cut_scale(arrays)
    while len(low):
        if count + len(low) > MOST_STATIC:
            return [f"{len(low)} boxes of static rows could not be confirmed"], count
        left = []
        for start in range(0, len(low), BATCH):
            part = slice(start, start + BATCH)
            least, most = static_bounds(arrays, low[part], high[part])
            kept = (arrays["length"] | (least >= need_low)) & (most <= need_high)
            left.append(~kept.all(axis=1))
        count += len(low)
        failed = np.concatenate(left)
        if not failed.any():
            break
        low, high = low[failed], high[failed]
        side = ((high - low) * scale).argmax(axis=1)
        index = np.arange(len(low))
        if not bool(((high - low)[index, side] > 0.0).all()):
            return ["static rows could not be confirmed"], count
        middle = 0.5 * (low[index, side] + high[index, side])
        first_high, second_low = high.copy(), low.copy()
        first_high[index, side], second_low[index, side] = middle, middle
        low, high = np.concatenate([low, second_low]), np.concatenate([first_high, high])
    return [], count


def cut_scale(arrays: dict[str, Any]) -> Matrix:
    """What a unit of each variable is worth when boxes are cut: any choice is correct, a good one is quick."""
    out = np.zeros(len(arrays["low"]))
    sizes = np.sqrt((arrays["loads"] ** 2).sum(axis=1))
    for load, names in enumerate(arrays["load_factors"]):
        for name in names:
            if name >= 0:
                out[name] = max(out[name], sizes[load] / max(sizes[0], 1e-300))
    for name in np.concatenate([arrays["factors"].ravel(), arrays["row_factors"].ravel()]):
        if name >= 0:
            out[name] = 1.0
    return out


def _static_witness(data: dict[str, Any], arrays: dict[str, Any], statuses: list[str]) -> list[str]:
    faults = []
    for row, status in enumerate(statuses):
        if status != "violated":
            continue
        broken = False
        for where in (data["where_low"][row], data["where_high"][row]):
            point = np.array([where], dtype=np.float64)
            if (point[0] < arrays["low"]).any() or (point[0] > arrays["high"]).any():
                continue
            least, most = static_bounds(arrays, point, point)
            broken = broken or most[0, row] < arrays["lower"][row]
            # A length is enclosed from zero on: its lower end is taken from the point's own centre.
            value = least[0, row] if not arrays["length"][row] else most[0, row] * (1.0 - 1e-6)
            broken = broken or value > arrays["upper"][row]
        if not broken:
            faults.append(f"{data['labels'][row]}: the witness does not break the limit")
    return faults


def check_separation(data: dict[str, Any]) -> list[str]:
    """Faults of a separation: modes counted exactly at the two corners, all soft and all stiff."""
    system = read_scatter(data["system"])
    if system["mass_factors"].size or system["stiffness_term_factors"].size:
        return ["two corners do not decide where mass or centre scatter"]
    clear = True
    mass = fractions(system["mass"].tolist())
    corners = [_corner(system, edge) for edge in (system["low"], system["high"])]
    need = Fraction(number(data["required"]))
    for low, high in data["intervals"]:
        first, last = Fraction(low) * (1 - need), Fraction(high) * (1 + need)
        if last <= first:
            continue
        above, _ = count_below(corners[1], mass, (2 * PI_LOW * last) ** 2)
        below = 0
        if first > 0:
            inside, equal = count_below(corners[0], mass, (2 * PI_HIGH * first) ** 2)
            below = inside + equal
        clear = clear and above <= below
    if data["status"] == "proven" and not clear:
        return ["a mode comes nearer to an excitation interval than required"]
    if data["status"] == "violated" and clear:
        return ["no mode comes nearer than required, though it is called violated"]
    return []


def _corner(system: dict[str, Matrix], edge: Matrix) -> list[list[Fraction]]:
    out: list[list[Fraction]] = fractions(system["fixed_dynamic"].tolist())
    size = range(len(out))
    for b, k, names in zip(system["axes"], system["stiffness"], system["stiffness_factors"], strict=True):
        weight = Fraction(float(k))
        for name in names:
            if name >= 0:
                if edge[name] <= 0.0:
                    raise ValueError("a factor is not positive")
                weight *= Fraction(float(edge[name]))
        row = fractions([float(v) for v in b])
        for i in size:
            for j in size:
                out[i][j] += weight * row[i] * row[j]
    return out


def check_selection(entries: list[dict[str, Any]]) -> list[str]:
    """Bookkeeping of a selection over scatter: sums of rules, order of cost, what each candidate's entries say."""
    faults: list[str] = []
    candidates = [entry["data"] for entry in entries if entry["kind"] == "candidate"]
    for entry in entries:
        if entry["kind"] == "rules":
            data = entry["data"]
            settled = sum(int(rule["excluded"]) for rule in data["rules"]) + int(data["met"])
            if data["stopped"] == "finished" and settled != int(data["designs"]):
                faults.append(f"the rules account for {settled} of {data['designs']} designs")
            if any(int(rule["excluded"]) < 0 for rule in data["rules"]):
                faults.append("a rule excluded a negative number of designs")
    costs = [number(candidate["cost"]) for candidate in candidates]
    if any(b < a for a, b in itertools.pairwise(costs)):
        faults.append("the candidates are not in order of cost")
    for candidate in candidates:
        own = [
            e["data"]
            for e in entries
            if e["data"].get("candidate") == candidate["position"] and "labels" in e["data"]
        ]
        found = [status for data in own for status in data["statuses"]]
        label = f"candidate {candidate['position']}"
        if candidate["status"] == "proven" and (not found or any(status != "proven" for status in found)):
            faults.append(f"{label} is called proven, which its entries do not say")
        if candidate["status"] == "proven" and [data["name"] for data in own] != candidate["entries"]:
            faults.append(f"{label}: entries are missing or not those announced")
        if candidate["status"] == "violated" and "violated" not in found and not candidate["sampled_only"]:
            faults.append(f"{label} is called violated without a witness")
    chosen = next((entry["data"] for entry in entries if entry["kind"] == "selection"), None)
    if chosen is not None:
        proven = [c["position"] for c in candidates if c["status"] == "proven"]
        if (chosen["winner"] is None) != (not proven) or (proven and chosen["winner"] != proven[0]):
            faults.append("the winner is not the first proven candidate")
        open_ones = [c["position"] for c in candidates if c["status"] in ("undecided", "sampled")]
        if sorted(chosen["undecided"]) != sorted(open_ones):
            faults.append("the undecided candidates are not those listed")
        if chosen["optimal"] and (open_ones or not proven):
            faults.append("called optimal though cheaper candidates are undecided or none is proven")
    return faults
