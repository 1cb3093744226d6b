"""One group of response rows on its way to a decision: tones of every shaft, noise, and static parts
together."""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from detune.proof.bisection import RowsDecision
from detune.proof.combined_bisect import Sampler, decide_rows, sampled
from detune.proof.noise_bisect import decide_noise
from detune.proof.noise_values import TOLERANCE, NoiseSampler, noise_sampled, noise_values_at
from detune.proof.scatter_data import values_at
from detune.proof.static_rows import StaticRowsDecision, decide_static_rows
from detune.solvers.design_rows import DesignRows, ResponseGroup
from detune.solvers.verdict import NoiseProof, Proof, ResponseProof, StaticProof, Status

Floats = NDArray[np.float64]
SPARE = 0.005
NOISE_BOXES = 5
"""A noise takes this many times as many boxes as a family of tones, since frequency alone takes about a
hundred."""
Part = Sampler | NoiseSampler


def claimed(decision: StaticRowsDecision, row: int) -> tuple[float, float]:
    """The enclosure that is claimed of a static row: the one proven, half a per cent wider, so that it can be
    re-checked."""
    low, high = decision.bound_low[row], decision.bound_high[row]
    spare = SPARE * max(abs(low), abs(high))
    return low - spare, high + spare


class Found:
    """What was found of one response row."""

    def __init__(
        self, status: Status, worst: float, bound: float, limit: float, point: tuple[float, ...], speed: float
    ) -> None:
        self.status, self.worst, self.bound, self.limit = status, worst, bound, limit
        self.point, self.speed = point, speed


class Response:
    """One group of response rows on its way to a decision."""

    def __init__(self, made: DesignRows, group: ResponseGroup) -> None:
        self.made, self.group = made, group
        self.condition = group.requirements[0].condition
        self.adds = np.zeros(len(group.requirements))
        self.limit = np.array(group.limit)
        self.boxes = 0
        self.static: StaticProof | None = None
        self._offsets()
        self.samples: list[Part] = []
        self.decisions: list[RowsDecision] = []

    def _offsets(self) -> None:
        """Take static parts at their own worst bound, over the whole scatter."""
        rows = [(i, row, how) for i, (row, how) in enumerate(self.group.static) if row is not None]
        if not rows:
            return
        limits = self.made.limits(self.group.each, [row for _, row, _ in rows])
        decision = decide_static_rows(limits)
        self.boxes += decision.boxes
        labels = tuple(self.group.requirements[i].label for i, *_ in rows)
        self.static = StaticProof(f"static parts of responses, {self.condition}", labels, limits, decision)
        for number, (index, _, how) in enumerate(rows):
            low, high = claimed(decision, number)
            if how == "limits":
                self.limit[index] = max(low, 0.0)
            else:
                self.adds[index] = high

    def sample(self, stop: bool) -> None:
        """Corners, grid and pattern search; independent parts (families, noise) get each its share of the limit."""
        room = np.maximum(self.limit - self.adds, 0.0)
        several = self.group.parts > 1 and not self.group.largest
        free = self._parts(room, stop and not several)
        if not several:
            self.samples = free
            return
        every = np.stack([found.best for found in free])
        together = self._together(every)
        for number, found in enumerate(free):
            with np.errstate(invalid="ignore"):
                share = found.best * np.where(together > 0.0, room / np.maximum(together, 1e-300), 1.0)
            # A row that a part does not move keeps a hair of the limit.
            share = np.maximum(np.where(np.isfinite(share), share, room), 1e-9 * room)
            self.samples.append(self._limited(found, share, number))

    @property
    def _forcing(self) -> float:
        return 1.0 if self.group.largest else 1.0 + self.made.map.forcing[1]

    def _parts(self, room: Floats, stop: bool) -> list[Part]:
        """Samples of all families, and of the noise at the end."""
        system = self.group.system
        out: list[Part] = [
            sampled(system, rows, stop_at_violation=stop) for rows in self.group.families(room, self._forcing)
        ]
        noise = self.group.noise(room, self._forcing)
        if noise is not None:
            out.append(noise_sampled(system, noise, stop_at_violation=stop))
        return out

    def _limited(self, found: Part, share: Floats, number: int) -> Part:
        """The same samples against another limit (R,)."""
        again: Part
        if isinstance(found, NoiseSampler):
            noise = self.group.noise(share, self._forcing)
            assert noise is not None
            again = NoiseSampler(self.group.system, noise)
        else:
            again = Sampler(self.group.system, self.group.families(share, self._forcing)[number])
        again.best, again.where = found.best, found.where
        return again

    def _together(self, values: Floats) -> Floats:
        """Values of the families (F, R) put together (R,)."""
        if self.group.largest or len(values) == 1:
            return np.asarray(values.max(axis=0))
        squares = np.array([row.squares for row in self.group.observed])
        return np.asarray(np.where(squares, np.sqrt((values**2).sum(axis=0)), values.sum(axis=0)))

    @property
    def may_be_violated(self) -> bool:
        """Whether some sample exceeds the limit that is left beside the static part's worst."""
        return any(found.violated for found in self.samples)

    def decide(self, max_boxes: int, interrupted: Callable[[], bool] | None, stop: bool) -> None:
        """Decide every family, and the noise."""
        # Where a static part is taken at its own worst, or parts share a limit, a row over it may yet be met.
        alone = len(self.samples) == 1 or self.group.largest
        fatal = np.array([stop and alone and row is None for row, _ in self.group.static])
        self.decisions = []
        for found in self.samples:
            if isinstance(found, NoiseSampler):
                decision = decide_noise(
                    self.group.system,
                    found.limits,
                    max_boxes=NOISE_BOXES * max_boxes,
                    interrupted=interrupted,
                    samples=found,
                    fatal=fatal,
                )
            else:
                decision = decide_rows(
                    self.group.system,
                    found.limits,
                    max_boxes=max_boxes,
                    interrupted=interrupted,
                    samples=found,
                    fatal=fatal,
                )
            self.decisions.append(decision)
        self.boxes += sum(decision.boxes for decision in self.decisions)

    def proofs(self) -> list[Proof]:
        """What the record needs."""
        labels = tuple(requirement.label for requirement in self.group.requirements)
        found: list[Proof] = [] if self.static is None else [self.static]
        names = [family.speed for family in self.group.group.rows.families]
        for number, (samples, decision) in enumerate(zip(self.samples, self.decisions, strict=True)):
            if isinstance(samples, NoiseSampler):
                name = f"{self.condition}, noise"
                found.append(NoiseProof(name, labels, self.group.system, samples.limits, decision))
                continue
            name = f"{self.condition}, {names[number]}"
            found.append(ResponseProof(name, labels, self.group.system, samples.limits, decision))
        return found

    def _at_one_point(self, index: int, point: Floats) -> tuple[float, float, float, tuple[float, ...]]:
        """By how much a row breaks its limit at one point of the scatter, every part at its worst speed; the value."""
        values = []
        for samples, decision in zip(self.samples, self.decisions, strict=True):
            if isinstance(samples, NoiseSampler):
                value = noise_values_at(self.group.system, samples.limits, point[None])[0, index]
                values.append(value * (1.0 - TOLERANCE))
                continue
            low, high = samples.limits.speed
            speeds = np.append(np.linspace(low, high, 65), np.clip(decision.speed[index], low, high))
            points = np.concatenate(
                [np.tile(point, (len(speeds), 1)), ((2.0 * np.pi * speeds) ** 2)[:, None]], axis=1
            )
            values.append(values_at(self.group.system, samples.limits, points)[:, index].max())
        every = np.zeros((len(values), len(self.limit)))
        every[:, index] = values
        adds, limit = (float(v[0, index]) for v in self.made.static_parts(self.group, point[None]))
        value = float(self._together(every)[index]) + adds
        return value - limit, value, limit, tuple(point.tolist())

    def verdict(self, index: int) -> Found:
        """What is known of one row. Violated only where one point of the scatter breaks the limit by itself."""
        lower = np.array([decision.lower for decision in self.decisions])
        upper = np.array([decision.upper for decision in self.decisions])
        worst, bound = float(self._together(lower)[index]), float(self._together(upper)[index])
        biggest = self.decisions[int(lower[:, index].argmax())]
        point = biggest.worst[index]
        statuses = {decision.status[index] for decision in self.decisions}
        status: Status = "proven" if statuses == {"proven"} else "undecided"
        adds, limit = (v[0, index] for v in self.made.static_parts(self.group, np.array(point)[None]))
        if len(self.decisions) > 1 and not self.group.largest:
            # Parts that are worst at different points of the scatter are no witness: they have to be at one.
            found = max(
                (self._at_one_point(index, np.array(d.worst[index])) for d in self.decisions),
                key=lambda f: f[0],
            )
            broken, value, limit, point = found
        else:
            broken, value = worst + adds - limit, worst + adds
        if broken > 0.0:
            return Found("violated", value, bound + self.adds[index], limit, point, biggest.speed[index])
        stated = float(self.limit[index])
        return Found(status, worst + adds, bound + self.adds[index], stated, point, biggest.speed[index])
