"""The checker's own assessment of designs in exact fractions, and the bookkeeping of a search.

All data of a record are floating-point numbers, hence fractions; static solution, windows, the number of
eigenvalues below a shift and the response are computed without rounding. Only pi and square roots are
enclosed: a shift omega^2 lies between two fractions, and a comparison that depends on which is a fault.
"""

from __future__ import annotations

import itertools
import math
from fractions import Fraction
from typing import Any

from detune.proof.checker_arithmetic import fractions, multiply, positive_pivots, solve_exactly

PI_LOW = Fraction(3141592653589793238, 10**18)
PI_HIGH = Fraction(3141592653589793239, 10**18)
LARGEST_ENUMERATION = 400

Complex = tuple[Fraction, Fraction]


def number(value: Any) -> float:
    """A number of a record: a float, or "inf" and "-inf"."""
    return float(value)


def assemble(stations: Any, weights: Any, fixed: Any) -> list[list[Fraction]]:
    """fixed + sum of weight b b^T over stations and axes, exactly."""
    n = len(fixed)
    out = [[Fraction(fixed[i][k]) for k in range(n)] for i in range(n)]
    for station, axes in zip(stations, weights, strict=True):
        for b, weight in zip(station, axes, strict=True):
            if not weight:
                continue
            row = fractions(b)
            for i in range(n):
                for k in range(n):
                    out[i][k] += weight * row[i] * row[k]
    return out


def station_weights(design: dict[str, Any], name: str) -> list[list[Fraction]]:
    """Axis values of each station, parallel count included."""
    groups = design["groups"]
    return [
        [Fraction(value) * groups[g]["count"] for value in groups[g][name]] for g in design["station_group"]
    ]


def within(value: Fraction, lower: Any, upper: Any) -> bool:
    """lower <= value <= upper, where a limit may be infinite."""
    low, high = number(lower), number(upper)
    above = low == -math.inf or (low != math.inf and value >= Fraction(low))
    return above and (high == math.inf or (high != -math.inf and value <= Fraction(high)))


def static_faults(design: dict[str, Any]) -> list[str]:
    """Broken static windows and rows."""
    stiffness = assemble(
        design["stations"], station_weights(design, "kappa_static"), design["fixed"]["static"]
    )
    n = len(stiffness)
    if positive_pivots(stiffness)[2] != n:
        return ["the design does not carry its load"]
    zero = [[Fraction(0)] * n for _ in range(n)]
    solved = solve_exactly(stiffness, zero, [(Fraction(v), Fraction(0)) for v in design["load"]])
    q = [value[0] for value in solved]
    faults: list[str] = []
    seen: dict[int, int] = {}
    for station, g in enumerate(design["station_group"]):
        group = design["groups"][g]
        index = seen.get(g, 0)
        seen[g] = index + 1
        row = fractions(design["stations"][station][2])
        z = Fraction(design["support_sign"][station]) * sum(a * b for a, b in zip(row, q, strict=True))
        force = Fraction(group["kappa_static"][2]) * z

        def limit(name: str, group: dict[str, Any] = group, index: int = index) -> Any:
            value = group[name]
            return value[index] if isinstance(value, list) else value

        if not within(force, limit("load_min"), limit("load_max")):
            faults.append(f"station {station}: static load outside its window")
        if not within(z, "-inf", limit("deflection_max")):
            faults.append(f"station {station}: static deflection above its limit")
    rows = design["static_rows"]
    for position, (row, lower, upper) in enumerate(
        zip(rows["rows"], rows["lower"], rows["upper"], strict=True)
    ):
        value = sum((a * b for a, b in zip(fractions(row), q, strict=True)), Fraction(0))
        if not within(value, lower, upper):
            faults.append(f"static row {position} outside its limits")
    return faults


def count_below(
    stiffness: list[list[Fraction]], mass: list[list[Fraction]], shift: Fraction
) -> tuple[int, int]:
    """Numbers of eigenvalues of K v = lambda M v below the shift, and equal to it."""
    size = range(len(mass))
    shifted = [[stiffness[i][k] - shift * mass[i][k] for k in size] for i in size]
    negative, zero, _ = positive_pivots(shifted)
    return negative, zero


def band_faults(design: dict[str, Any], separation: float | None = None, slack: float = 0.0) -> list[str]:
    """Excitation intervals that some mode comes too near to, for the required separations or a stated one."""
    stiffness = assemble(
        design["stations"], station_weights(design, "kappa_dynamic"), design["fixed"]["dynamic"]
    )
    mass = fractions(design["mass"])
    faults = []
    bands = design["bands"]
    for low, high, required in zip(bands["low"], bands["high"], bands["separation"], strict=True):
        need = Fraction(required if separation is None else separation) - Fraction(slack)
        first, last = Fraction(low) * (1 - need), Fraction(high) * (1 + need)
        if last <= first:
            continue
        # Rounding of pi only narrows what is tested by one part in 10^18.
        last_square = (2 * PI_LOW * last) ** 2
        above, _ = count_below(stiffness, mass, last_square)
        below = 0
        if first > 0:
            inside, equal = count_below(stiffness, mass, (2 * PI_HIGH * first) ** 2)
            below = inside + equal
        if above > below:
            faults.append(f"a mode is nearer than {float(need):.6g} to the interval {low} to {high} Hz")
    return faults


def response_faults(design: dict[str, Any]) -> list[str]:
    """Harmonic limits that are exceeded."""
    cases = design["harmonic"]
    faults = []
    for case, frequency in enumerate(cases["frequency"]):
        omega = Fraction(2.0 * math.pi * frequency)
        kappa = [
            [
                (Fraction(k), Fraction(h) + omega * Fraction(c))
                for k, h, c in zip(group["kappa_dynamic"], group["loss"], group["viscous"], strict=True)
            ]
            for group in (design["groups"][g] for g in design["station_group"])
        ]
        counts = [design["groups"][g]["count"] for g in design["station_group"]]
        faults += [f"case {case}: {text}" for text in case_faults(design, case, omega, kappa, counts)]
    return faults


def case_faults(
    design: dict[str, Any], case: int, omega: Fraction, kappa: list[list[Complex]], counts: list[int]
) -> list[str]:
    """Limits exceeded in one load case."""
    cases, stations = design["harmonic"], design["stations"]
    base = [[pair(cases["base"], case, s, a) for a in range(3)] for s in range(len(stations))]
    q = response(
        stations=[b for station in stations for b in station],
        kappa=[(x * counts[s], y * counts[s]) for s, axes in enumerate(kappa) for x, y in axes],
        base=[u for axes in base for u in axes],
        load=[pair(cases["load"], case, i) for i in range(len(design["mass"]))],
        fixed=design["fixed"],
        mass=fractions(design["mass"]),
        omega=omega,
    )
    faults = []
    for position, row in enumerate(cases["rows"]):
        if exceeds(dot(row, q), cases["row_limit"][case][position]):
            faults.append(f"row {position} exceeds its limit")
    totals = [(Fraction(0), Fraction(0)) for _ in cases["total"]]
    for s, station in enumerate(stations):
        for a in range(3):
            x, y = dot(station[a], q)
            deflection = (x - base[s][a][0], y - base[s][a][1])
            force = multiply(kappa[s][a], deflection)
            if exceeds(deflection, cases["deflection_limit"][case][s][a]):
                faults.append(f"station {s} axis {a}: deflection exceeds its limit")
            if exceeds(force, cases["force_limit"][case][s][a]):
                faults.append(f"station {s} axis {a}: force exceeds its limit")
            for t, coefficients in enumerate(cases["total"]):
                factor = Fraction(coefficients[s][a]) * counts[s]
                totals[t] = (totals[t][0] + factor * force[0], totals[t][1] + factor * force[1])
    for t, value in enumerate(totals):
        if exceeds(value, cases["total_limit"][case][t]):
            faults.append(f"total {t} exceeds its limit")
    return faults


def pair(data: dict[str, Any], *index: int) -> Complex:
    """One complex number of plain data, as fractions."""
    real, imag = data["re"], data["im"]
    for position in index:
        real, imag = real[position], imag[position]
    return Fraction(real), Fraction(imag)


def dot(row: list[float], q: list[Complex]) -> Complex:
    """Real row times complex vector."""
    weights = fractions(row)
    return (
        sum((w * x for w, (x, _) in zip(weights, q, strict=True)), Fraction(0)),
        sum((w * y for w, (_, y) in zip(weights, q, strict=True)), Fraction(0)),
    )


def exceeds(value: Complex, limit: Any) -> bool:
    """Whether a magnitude exceeds a limit."""
    bound = number(limit)
    return bound != math.inf and value[0] ** 2 + value[1] ** 2 > Fraction(bound) ** 2


def response(
    stations: list[Any],
    kappa: list[Complex],
    base: list[Complex],
    load: list[Complex],
    fixed: dict[str, Any],
    mass: list[list[Fraction]],
    omega: Fraction,
) -> list[Complex]:
    """q of (-w^2 M + K + j (H + w C) + sum b^T kappa b) q = load + sum b^T kappa u, exactly."""
    real = assemble([stations], [[k[0] for k in kappa]], fixed["dynamic"])
    imag = assemble([stations], [[k[1] for k in kappa]], fixed["hysteretic"])
    right = list(load)
    size = range(len(mass))
    for i in size:
        for k in size:
            real[i][k] -= omega * omega * mass[i][k]
            imag[i][k] += omega * Fraction(fixed["viscous"][i][k])
    for b, own, u in zip(stations, kappa, base, strict=True):
        if not any(u):
            continue
        x, y = multiply(own, u)
        for i in size:
            weight = Fraction(b[i])
            right[i] = (right[i][0] + weight * x, right[i][1] + weight * y)
    return solve_exactly(real, imag, right)


def exact_output(
    system: dict[str, Any], output: dict[str, Any], point: list[float], frequency: float
) -> float:
    """|y| of a robust output at one point, from exact fractions (the last root and power are rounded)."""
    omega = Fraction(2.0 * math.pi * frequency)
    values = [Fraction(v) for v in point] + [Fraction(1)]
    kappa = [
        (
            values[s] * Fraction(k),
            values[t] * (values[s] * Fraction(h) + omega * Fraction(c)),
        )
        for k, h, c, s, t in zip(
            system["stiffness"],
            system["loss"],
            system["viscous"],
            system["stiffness_variable"],
            system["damping_variable"],
            strict=True,
        )
    ]
    mass = fractions(system["mass"])
    for term, variable in zip(system["mass_terms"], system["mass_variable"], strict=True):
        for i, row in enumerate(term):
            for k, value in enumerate(row):
                mass[i][k] += values[variable] * Fraction(value)
    base = [pair(output["base"], a) for a in range(len(kappa))]
    load = [pair(output["load"], i) for i in range(len(mass))]
    fixed = {name: system["fixed_" + name] for name in ("dynamic", "hysteretic", "viscous")}
    q = response(system["axes"], kappa, base, load, fixed, mass, omega)
    y = (Fraction(0), Fraction(0))
    for i, value in enumerate(q):
        part = multiply(pair(output["row"], i), value)
        y = (y[0] + part[0], y[1] + part[1])
    for a, (own, b) in enumerate(zip(kappa, system["axes"], strict=True)):
        coefficient = pair(output["force"], a)
        if any(coefficient):
            x, z = dot(b, q)
            force = multiply(own, (x - base[a][0], z - base[a][1]))
            part = multiply(coefficient, force)
            y = (y[0] + part[0], y[1] + part[1])
    scale = float(omega) ** (output["load_power"] + output["output_power"])
    offset = output["offset"]
    shift = complex(offset["re"], offset["im"]) if isinstance(offset, dict) else complex(offset)
    return float(abs(complex(float(y[0]), float(y[1])) * scale - shift))


def design_faults(design: dict[str, Any]) -> list[str]:
    """Everything a design breaks."""
    return static_faults(design) + band_faults(design) + response_faults(design)


def pick_design(selection: dict[str, Any], parts: list[int], ballast: int) -> dict[str, Any]:
    """Data of one design out of a recorded selection."""
    groups = []
    for group, part in zip(selection["groups"], parts, strict=True):
        own: dict[str, Any] = {"count": group["count"]}
        for name in ("kappa_static", "kappa_dynamic", "loss", "viscous", "cost"):
            own[name] = group[name][part]
        for name in ("load_min", "load_max", "deflection_max"):
            values = group[name]
            own[name] = [row[part] for row in values] if isinstance(values[0], list) else values[part]
        groups.append(own)
    shared = ("stations", "station_group", "support_sign", "fixed", "bands", "static_rows", "harmonic")
    steps = selection["ballast"]
    return {
        **{name: selection[name] for name in shared},
        "groups": groups,
        "mass": steps["mass"][ballast],
        "load": steps["load"][ballast],
        "ballast_cost": steps["cost"][ballast],
    }


def check_search(data: dict[str, Any]) -> tuple[list[str], int]:
    """Faults of a recorded search: bookkeeping, designs, and for small problems all cheaper designs."""
    faults = []
    settled = sum(data["counts"].values())
    if data["status"] == "complete" and settled != data["design_count"]:
        faults.append(
            f"{settled} of {data['design_count']} designs are accounted for, yet it is called complete"
        )
    if any(count < 0 for count in data["counts"].values()):
        faults.append("a rule settled a negative number of designs")
    if data["counts"].get("met", 0) < len(data["designs"]) and data["status"] == "complete":
        faults.append("more designs are listed than met the final test")
    checked = 0
    for found, chosen in zip(data["designs"], data["chosen"], strict=True):
        label = f"design {found['parts']} with ballast step {found['ballast']}"
        cost = sum((Fraction(group["cost"]) for group in chosen["groups"]), Fraction(chosen["ballast_cost"]))
        if abs(cost - Fraction(found["cost"])) > Fraction(1, 10**9) * max(abs(cost), Fraction(1)):
            faults.append(f"{label}: its parts cost {float(cost)}, not {found['cost']}")
        faults += [f"{label}: {text}" for text in design_faults(chosen)]
        checked += 1
        if data["selection"] is not None and chosen != pick_design(
            data["selection"], found["parts"], found["ballast"]
        ):
            faults.append(f"{label}: its data are not those of the selection")
    front = [(number(found["cost"]), number(found["value"])) for found in data["designs"]]
    if any(b[0] <= a[0] or b[1] <= a[1] for a, b in itertools.pairwise(front)):
        faults.append("the designs do not form a front")
    if data["selection"] is not None and data["status"] == "complete" and data["final_test"] == "rows":
        more, count = check_enumeration(data)
        faults += more
        checked += count
    return faults, checked


def check_enumeration(data: dict[str, Any]) -> tuple[list[str], int]:
    """Look for a feasible design cheaper than the cheapest one recorded; only where few have to be looked at."""
    selection = data["selection"]
    best = min((Fraction(found["cost"]) for found in data["designs"]), default=None)
    ranges = [range(len(group["cost"])) for group in selection["groups"]]
    total = math.prod(len(r) for r in ranges) * len(selection["ballast"]["cost"])
    if total != data["design_count"]:
        return [f"the selection has {total} designs, not {data['design_count']}"], 0
    cheaper = []
    for ballast, extra in enumerate(selection["ballast"]["cost"]):
        for parts in itertools.product(*ranges):
            prices = (Fraction(g["cost"][p]) for g, p in zip(selection["groups"], parts, strict=True))
            cost = sum(prices, Fraction(extra))
            if best is None or cost < best * (1 - Fraction(1, 10**9)):
                cheaper.append((list(parts), ballast))
                if len(cheaper) > LARGEST_ENUMERATION:
                    return [], 0
    for chosen, ballast in cheaper:
        design = pick_design(selection, chosen, ballast)
        if not static_faults(design) and not band_faults(design) and not response_faults(design):
            return [f"design {chosen} with ballast step {ballast} is cheaper and meets every row"], len(
                cheaper
            )
    return [], len(cheaper)
