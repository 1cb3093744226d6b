"""What an assessment says, as plain frozen rows."""

from dataclasses import dataclass

from detune.response.design import Design


@dataclass(frozen=True)
class MarginRow:
    """One requirement judged: margin = limit/value - 1 (upper), value/limit - 1 (lower), positive = met.

    `unit` is a kind of unit. `frequency` (Hz) is the speed or frequency at which the worst occurs,
    None where there is none. `note` says how the value came about where that is not plain: which reading of an
    unknown damping kind was the worse, that an amplitude was found by iteration. `reference` (SI) is that of the
    decibels in which the limit was stated, None for a limit in a unit; the values are in SI in either case.
    """

    kind: str
    condition: str
    place: str
    quantity: str
    unit: str
    value: float
    lower: float | None
    upper: float | None
    margin: float
    frequency: float | None
    note: str = ""
    reference: float | None = None

    @property
    def told(self) -> str:
        """The quantity with its note."""
        return f"{self.quantity} ({self.note})" if self.note else self.quantity

    @property
    def label(self) -> str:
        """The requirement in words: quantity, note, place, condition."""
        place = f" at {self.place}" if self.place != "whole machine" else ""
        return f"{self.told}{place} ({self.condition})"


@dataclass(frozen=True)
class StationRow:
    """What the fitter needs at one station; loads and deflections are those of one part.

    Axial load is positive in compression; `installed_height` is None where the part states no height.
    `levels`: the part stands upright on the floor, so that its height counts in levelling the machine.
    """

    station: str
    group: str
    part: str
    parallel: int
    position: tuple[float, float, float]
    axial_load: float
    lateral_load: float
    compression: float
    free_height: float | None
    installed_height: float | None
    load_min: float
    load_max: float
    levels: bool = True


@dataclass(frozen=True)
class ModeRow:
    """One undamped mode at the dynamic stiffness.

    `separation` is from the nearest excitation interval of the steady conditions, None where none
    excites; `amplification` is the reciprocal of the mode's equivalent loss factor.
    """

    frequency: float
    name: str
    amplification: float
    separation: float | None
    interval: tuple[float, float] | None
    participation: tuple[float, ...]
    exempt: bool


@dataclass(frozen=True)
class PowerRow:
    """Mean power in and dissipated (W) over a condition's tones, and the relative closing error."""

    condition: str
    speed: float
    put_in: float
    dissipated: float
    closing_error: float


@dataclass(frozen=True)
class BarredBand:
    """A band of speed (Hz) of a shaft in which the machine may not dwell in a condition, and `why` in words."""

    condition: str
    shaft: str
    low: float
    high: float
    why: str


@dataclass(frozen=True)
class Assessment:
    """What the exact equations say of one design. Only this may say "meets the brief".

    `notes`: sentences that no row says, such as why the machine does not stand. `barred`: speeds not to dwell at
    that were found for the design, where the brief asks for them.
    """

    design: Design
    meets: bool
    cost: float
    added_mass: float
    part_numbers: int
    separation: float
    least_margin: float
    margins: tuple[MarginRow, ...]
    stations: tuple[StationRow, ...]
    modes: tuple[ModeRow, ...]
    power: tuple[PowerRow, ...]
    total_load: float
    notes: tuple[str, ...] = ()
    barred: tuple[BarredBand, ...] = ()

    @property
    def tightest(self) -> MarginRow:
        """The requirement with the least margin."""
        return min(self.margins, key=lambda row: row.margin)

    @property
    def failed(self) -> tuple[MarginRow, ...]:
        """The requirements that are not met, hardest first."""
        return tuple(sorted((row for row in self.margins if row.margin < 0.0), key=lambda row: row.margin))
