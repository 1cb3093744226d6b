"""What certification says of a design over its scatter, as plain frozen rows."""

from dataclasses import dataclass, field
from typing import Literal

from detune.proof.bisection import RowsDecision
from detune.proof.noise_data import NoiseRows
from detune.proof.scatter_data import LimitedRows, ScatterSystem
from detune.proof.static_rows import StaticLimits, StaticRowsDecision

Status = Literal["proven", "violated", "undecided", "sampled"]
STATUS_WORDS: dict[str, str] = {
    "proven": "proven",
    "violated": "violated",
    "undecided": "undecided",
    "sampled": "sampled, not proven",
}


@dataclass(frozen=True)
class RowVerdict:
    """One requirement over the scatter.

    `worst`: the worst value that was evaluated exactly, and `frequency` (Hz, speed), `where` (corner in words), `point`
    the place. `guaranteed`: no value is worse than this (the same as `worst` where that is exact, None where there
    is no guarantee). lower, upper: limits at the worst place. margin, guaranteed_margin: of the two.
    """

    kind: str
    condition: str
    place: str
    quantity: str
    unit: str
    status: Status
    worst: float
    guaranteed: float | None
    lower: float | None
    upper: float | None
    margin: float
    guaranteed_margin: float | None
    frequency: float | None
    where: str
    point: tuple[float, ...]
    note: str = ""

    @property
    def label(self) -> str:
        """The requirement in words, as the assessor's rows have it."""
        place = f" at {self.place}" if self.place != "whole machine" else ""
        return f"{self.quantity}{place} ({self.condition})"


@dataclass(frozen=True, eq=False)
class ResponseProof:
    """A family of response rows decided: what the record needs to compute it again."""

    name: str
    labels: tuple[str, ...]
    system: ScatterSystem
    limits: LimitedRows
    decision: RowsDecision


@dataclass(frozen=True, eq=False)
class NoiseProof:
    """Response rows under noise decided."""

    name: str
    labels: tuple[str, ...]
    system: ScatterSystem
    limits: NoiseRows
    decision: RowsDecision


@dataclass(frozen=True, eq=False)
class StaticProof:
    """Static rows decided."""

    name: str
    labels: tuple[str, ...]
    limits: StaticLimits
    decision: StaticRowsDecision


@dataclass(frozen=True, eq=False)
class SeparationProof:
    """Separation decided from the two corners "all soft" and "all stiff" of the machine `system`."""

    name: str
    system: ScatterSystem
    intervals: tuple[tuple[float, float], ...]
    required: float
    status: Status
    worst: float


Proof = ResponseProof | NoiseProof | StaticProof | SeparationProof


@dataclass(frozen=True, eq=False)
class DesignVerdict:
    """What is known of one design over the scatter.

    status: proven when every requirement is; violated when one is, at a point that was evaluated exactly; sampled when
    the rest is of kinds the bounds do not know and every sample kept its limit; else undecided. part (G,), step: the
    design by number.
    """

    part: tuple[int, ...]
    step: int
    cost: float
    status: Status
    rows: tuple[RowVerdict, ...]
    boxes: int
    seconds: float
    proofs: tuple[Proof, ...] = field(repr=False, default=())

    @property
    def tightest(self) -> RowVerdict:
        """The requirement with the least margin at the worst place found."""
        return min(self.rows, key=lambda row: row.margin)

    @property
    def witness(self) -> RowVerdict | None:
        """The violated requirement that misses its limit by most, None if none is violated."""
        broken = [row for row in self.rows if row.status == "violated"]
        return min(broken, key=lambda row: row.margin) if broken else None


def design_status(rows: tuple[RowVerdict, ...]) -> Status:
    """Return what the rows of a design make of it: the worst of them."""
    found = {row.status for row in rows}
    ranked: tuple[Status, ...] = ("violated", "undecided", "sampled")
    for status in ranked:
        if status in found:
            return status
    return "proven"
