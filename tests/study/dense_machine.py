"""The machine of everything_to_size.toml put together again, in numpy that takes complex unknowns.

Written from the figures of the study and the formulas of the textbooks, without the program's assembly. Responses are
solved in real form (2 n equations), so that everything is analytic in the unknowns and a complex step gives slopes to
rounding: f'(x) = Im f(x + i h)/h (Squire and Trapp, SIAM Review 40 (1998) 110).
"""

from __future__ import annotations

import math

import numpy as np

G = 9.80665
CENTRE = np.array([0.04, -0.02, 0.3])
ARM = np.array([0.1, 0.05, 0.6])
POINTS = {"flange": np.array([0.4, 0.2, 0.6]), "foot": np.array([-0.4, 0.25, 0.0])}
# Freedoms: the machine's six about its centre, the absorber's z, the floor's z.
N = 8
FLOOR_MASS, FLOOR_STIFFNESS, FLOOR_DAMPING = 900.0, 30e6, 9000.0


def skew(r):
    zero = 0.0 * r[0]
    return np.array([[zero, -r[2], r[1]], [r[2], zero, -r[0]], [-r[1], r[0], zero]])


def machine_rows(place):
    """Motion (3, N) of a place on the machine."""
    rows = np.zeros((3, N), dtype=np.result_type(place, float))
    rows[:, :3], rows[:, 3:6] = np.eye(3), -skew(place - CENTRE)
    return rows


def up(column):
    rows = np.zeros((3, N))
    rows[2, column] = 1.0
    return rows


class Dense:
    """The machine at unknowns x (12,), which may be complex; order as in the study."""

    def __init__(self, x):
        left, right, kx, ky, eta, c, ballast, mass, tuning, ratio, distance, height = x
        zero = 0.0 * left
        spring = mass * (2.0 * math.pi * tuning) ** 2
        dashpot = 2.0 * ratio * np.sqrt(mass * spring)
        ab = [np.array([-distance, y, zero]) for y in (-0.3, 0.3)]
        cd = [np.array([0.5 + zero, y, height]) for y in (-0.3, 0.3)]
        soft = np.array([0.6 * left, 0.6 * left, left])
        stiff = np.array([kx, ky, right])
        viscous = np.array([0.4 * c, 0.4 * c, c])
        none = np.array([zero, zero, zero])
        self.ballast, self.mass_absorber = ballast, mass
        # name: rows, parallel, dynamic stiffness, loss factor, viscous, dynamic over static, place on the machine
        self.stations = {
            "A": (machine_rows(ab[0]) - up(7), 1.0, soft, eta, none, 1.2, ab[0]),
            "B": (machine_rows(ab[1]) - up(7), 1.0, soft, eta, none, 1.2, ab[1]),
            "C": (machine_rows(cd[0]) - up(7), 2.0, stiff, zero, viscous, 1.3, cd[0]),
            "D": (machine_rows(cd[1]) - up(7), 1.0, stiff, zero, viscous, 1.3, cd[1]),
            "arm": (up(6) - machine_rows(ARM), 1.0, np.array([spring] * 3), zero,
                    np.array([zero, zero, dashpot]), 1.0, ARM),
        }  # fmt: skip
        place = machine_rows(np.array([0.1, 0.0, 0.1]))
        a, b, h = 0.8, 0.5, 0.05
        box = np.diag([b * b + h * h, a * a + h * h, a * a + b * b]) / 12.0
        self.mass = np.zeros((N, N), dtype=np.result_type(x, float))
        self.mass += np.diag([240.0, 240.0, 240.0, 9.0, 14.0, 17.0, 0.0, FLOOR_MASS])
        self.mass[6, 6] += mass
        self.mass += ballast * place.T @ place
        self.mass[3:6, 3:6] += ballast * box
        self.weight = -G * (240.0 * np.eye(N)[2] + mass * np.eye(N)[6] + ballast * place[2])
        self.geometric = self._geometric(place[2])
        self.stiffness = self._sum(lambda s: s[2]) + self.geometric
        self.stiffness[7, 7] += FLOOR_STIFFNESS
        self.static = self._sum(lambda s: s[2] / s[5])
        self.static[7, 7] += FLOOR_STIFFNESS
        self.hysteretic = self._sum(lambda s: s[2] * s[3])
        self.viscous = self._sum(lambda s: s[4])
        self.viscous[7, 7] += FLOOR_DAMPING
        self.rest = np.linalg.solve(self.static, self.weight)

    def _sum(self, of):
        return sum(s[1] * s[0].T @ (of(s)[:, None] * s[0]) for s in self.stations.values())

    def _geometric(self, ballast_row):
        """Gravity's stiffness under the forces that equal springs carry, on the machine's rotations."""
        equal = sum(s[1] * s[0][:, :7].T @ s[0][:, :7] for s in self.stations.values())
        rest = np.linalg.solve(equal, self.weight[:7])
        total = np.zeros((3, 3), dtype=self.mass.dtype)

        def add(arm, force):
            nonlocal total
            outer = np.outer(arm, force)
            total = total + np.trace(outer) * np.eye(3) - 0.5 * (outer + outer.T)

        add(np.array([0.1, 0.0, 0.1]) - CENTRE, np.array([0.0, 0.0, -G]) * self.ballast)
        for name, s in self.stations.items():
            force = -s[1] * s[0][:, :7] @ rest
            add(s[6] - CENTRE, -force if name == "arm" else force)
        whole = np.zeros((N, N), dtype=self.mass.dtype)
        whole[3:6, 3:6] = total
        return whole

    def deflected(self, name):
        return self.stations[name][0] @ self.rest

    def load(self, name):
        s = self.stations[name]
        return s[2] / s[5] * self.deflected(name)

    def respond(self, omega, load, base):
        """Real and imaginary part of q (N,) under a load (N,) and a floor motion (3,), both complex constants."""
        lossy = self.hysteretic + omega * self.viscous
        real = self.stiffness - omega**2 * self.mass
        level = base * np.array([1.0, 1.0, 0.0])
        top, bottom = load.real + 0.0 * self.rest, load.imag + 0.0 * self.rest
        for name, s in self.stations.items():
            if name != "arm":
                k, h = s[2], s[2] * s[3] + omega * s[4]
                top = top + s[1] * s[0].T @ (k * level.real - h * level.imag)
                bottom = bottom + s[1] * s[0].T @ (k * level.imag + h * level.real)
        own = FLOOR_STIFFNESS - omega**2 * FLOOR_MASS + 1j * omega * FLOOR_DAMPING
        top[7] += (own * base[2]).real
        bottom[7] += (own * base[2]).imag
        q = np.linalg.solve(np.block([[real, -lossy], [lossy, real]]), np.concatenate([top, bottom]))
        return q[:N], q[N:], level

    def observe(self, allowable, place, omega, answer):
        """What a limit looks at, (real part, imaginary part), each (3,)."""
        re, im, level = answer
        kind = allowable.kind

        def turned(pair, rate):
            for _ in range(rate):
                pair = (-omega * pair[1], omega * pair[0])
            return pair

        def point(name):
            return machine_rows(POINTS[name]) @ re, machine_rows(POINTS[name]) @ im

        def deflection(name):
            rows = self.stations[name][0]
            moved = level if name != "arm" else 0.0 * level
            return rows @ re - moved.real, rows @ im - moved.imag

        def force(name):
            s = self.stations[name]
            a, b = deflection(name)
            h = s[2] * s[3] + omega * s[4]
            return s[2] * a - h * b, s[2] * b + h * a

        def floor_force():
            each = [(self.stations[n][1], *force(n)) for n in "ABCD"]
            return sum(p * a for p, a, _ in each), sum(p * b for p, _, b in each)

        if kind in ("displacement", "velocity", "acceleration", "weighted-acceleration"):
            rate = {"displacement": 0, "velocity": 1}.get(kind, 2)
            return turned(point(place), rate)
        if kind in ("relative-motion", "gap"):
            a, b = point(place)
            floor = np.array([0.0, 0.0, 1.0])
            return a - level.real - floor * re[7], b - level.imag - floor * im[7]
        if kind == "transmissibility":
            return point(place) if allowable.of == "motion" else floor_force()
        if kind == "uplift" or (kind == "transmitted-force" and allowable.through == "each-station"):
            a, b = force(place)
        elif kind == "mount-deflection":
            a, b = deflection(place)
        else:
            a, b = floor_force()
            if place == "ground":
                a, b = a.copy(), b.copy()
                a[2] = FLOOR_STIFFNESS * re[7] - omega * FLOOR_DAMPING * im[7]
                b[2] = FLOOR_STIFFNESS * im[7] + omega * FLOOR_DAMPING * re[7]
            return a, b
        if getattr(allowable, "direction", "") == "lateral":
            a, b = a * np.array([1.0, 1.0, 0.0]), b * np.array([1.0, 1.0, 0.0])
        return a, b


def amplitude(pair, along, statistic):
    """Size of a phasor vector as a limit counts it: along a direction, by energy, or its ellipse's major semi-axis."""
    a, b = pair
    if along is not None:
        u = np.asarray(along)
        size = np.sqrt((a @ u) ** 2 + (b @ u) ** 2)
    elif statistic == "rms":
        size = np.sqrt(a @ a + b @ b)
    else:
        p, q, r = a @ a + b @ b, a @ a - b @ b, 2.0 * (a @ b)
        size = np.sqrt((p + np.sqrt(q**2 + r**2)) / 2.0)
    return size * {"rms": math.sqrt(0.5), "peak-to-peak": 2.0}.get(statistic, 1.0)


def stepped(function, x):
    """Value and slopes of a function that is analytic in x, by complex steps."""
    slopes = []
    for k in range(len(x)):
        z = x.astype(complex)
        h = 1e-30 * max(abs(x[k]), 1.0)
        z[k] += 1j * h
        slopes.append(np.imag(function(z)) / h)
    return np.real(function(x.astype(complex))), np.array(slopes).T
