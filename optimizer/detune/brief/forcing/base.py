"""What every forcing kind hands on: tones, each a phasor of known growth over a range of frequency."""

import cmath
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, ClassVar

from pydantic import field_validator, model_validator

from detune.brief.condition import SpeedRange, check_range
from detune.brief.statement import Direction, Frequency, Name, Statement, listed_once, refuse

if TYPE_CHECKING:
    from detune.physics.array_types import FloatArray
    from detune.physics.pulses import Pulse
    from detune.physics.spectra import PowerSpectralDensity

Complex3 = tuple[complex, complex, complex]
ZERO3: Complex3 = (0j, 0j, 0j)


@dataclass(frozen=True)
class Tone:
    """One sinusoid of a forcing, its frequency `order` times a speed between `low` and `high` (Hz).

    `force` N and `moment` N m act at `position` on body `on`, times omega**power with omega the
    tone's own angular frequency in rad/s. A tone with `base` moves the floor instead: displacement
    phasor in m, times omega**power. Tones of one `speed` name share one speed. Tones with
    `phase_known` of the same speed and order add as phasors, all others by their amplitudes. A `broadband` tone
    stands for a band of a spectrum and makes no excitation interval for separation.
    """

    source: str
    speed: str
    order: float
    low: float
    high: float
    on: str | None
    position: tuple[float, float, float]
    force: Complex3 = ZERO3
    moment: Complex3 = ZERO3
    base: Complex3 | None = None
    power: int = 0
    phase_known: bool = False
    broadband: bool = False


@dataclass(frozen=True, eq=False)
class Noise:
    """Gaussian random forcing: a one-sided density over frequency, of a floor acceleration or of a force.

    `spectrum` is in (m/s^2)^2/Hz along the unit direction `base`, or in N^2/Hz (N m for moments) of a load
    whose pattern on body `on` at `position` is `force` and `moment` per unit. `duration` (s) is how long it
    lasts, for the expected extreme. Noises are independent of each other: they add in power.
    """

    source: str
    spectrum: "PowerSpectralDensity"
    duration: float
    on: str | None = None
    position: tuple[float, float, float] = (0.0, 0.0, 0.0)
    force: tuple[float, float, float] = (0.0, 0.0, 0.0)
    moment: tuple[float, float, float] = (0.0, 0.0, 0.0)
    base: tuple[float, float, float] | None = None


@dataclass(frozen=True, eq=False)
class Transient:
    """A pulse or a record in time: floor acceleration (m/s^2) along the unit direction `base`, or a load.

    Exactly one of `pulse` and `record` (T,), the latter `step` s apart and straight between, or neither
    with a `velocity` (m/s): a jump of the floor's velocity along `base` at the start (drop, velocity step).
    `weight_acts`: the machine comes from free fall, so its weight comes on at once.
    """

    source: str
    pulse: "Pulse | None" = None
    record: "FloatArray | None" = None
    step: float = 0.0
    velocity: float = 0.0
    weight_acts: bool = False
    on: str | None = None
    position: tuple[float, float, float] = (0.0, 0.0, 0.0)
    force: tuple[float, float, float] = (0.0, 0.0, 0.0)
    moment: tuple[float, float, float] = (0.0, 0.0, 0.0)
    base: tuple[float, float, float] | None = None


class Forcing(Statement):
    """Base of every forcing kind. `conditions` left out means every condition.

    A kind gives tones, noises or transients, whichever it is made of.
    """

    kind: str
    name: Name
    conditions: tuple[Name, ...] | None = None

    title: ClassVar[str]

    @field_validator("conditions")
    @classmethod
    def _some_conditions(cls, value: tuple[str, ...] | None) -> tuple[str, ...] | None:
        return listed_once(value)

    def tones(self, speeds: Mapping[str, SpeedRange]) -> tuple[Tone, ...]:
        """Return the tones of this forcing in a condition whose shafts turn at `speeds` (Hz)."""
        return ()

    def noises(self) -> tuple[Noise, ...]:
        """Return the random parts of this forcing."""
        return ()

    def transients(self) -> tuple[Transient, ...]:
        """Return the records in time of this forcing."""
        return ()

    def shaft_needed(self) -> str | None:
        """Return the shaft this forcing follows, or None."""
        return None

    def floor_direction(self) -> Direction | None:
        """Return the unit direction along which this forcing moves the floor, None for a load on a body."""
        return None

    def ground_moves(self) -> bool:
        """Return whether the ground under the floor moves too, in a way this forcing does not say."""
        return self.floor_direction() is not None

    def data_files(self) -> tuple[str, ...]:
        """Return the files this forcing was read from, as the study names them."""
        return ()

    def assumed(self) -> tuple[str, ...]:
        """Return what this forcing leaves open and the program fills in, in words."""
        return ()


class ShaftForcing(Forcing):
    """A forcing that follows a shaft."""

    shaft: Name

    def shaft_needed(self) -> str | None:
        return self.shaft


class SteadyToneForcing(Forcing):
    """A forcing with a frequency of its own: one value, or a range it may lie anywhere in."""

    frequency: Frequency | SpeedRange

    @field_validator("frequency", mode="before")
    @classmethod
    def _one_or_two(cls, value: object) -> object:
        if isinstance(value, (list, tuple)) and len(value) != 2:
            raise refuse(list(value), 'a frequency such as "25 Hz" or a range such as ["10 Hz", "60 Hz"]')
        return value

    @model_validator(mode="after")
    def _range(self) -> "SteadyToneForcing":
        check_range(*self.band(), "frequency")
        return self

    def band(self) -> SpeedRange:
        """Return the lowest and highest frequency in Hz."""
        return self.frequency if isinstance(self.frequency, tuple) else (self.frequency, self.frequency)

    def speed_name(self) -> str:
        """Return the name of the tone's speed: forcings of one and the same fixed frequency share it."""
        low, high = self.band()
        return fixed_speed(low) if low == high else f"frequency of {self.name}"


def fixed_speed(frequency: float) -> str:
    """Return the name of the speed of every tone that stays at one frequency (Hz)."""
    return f"{frequency:.9g} Hz"


def phasor(amplitude: tuple[float, float, float], phase: float | None) -> Complex3:
    """Return the complex amplitude of a peak vector with a common phase (rad; None counts as zero)."""
    turn = cmath.exp(1j * (phase or 0.0))
    return (amplitude[0] * turn, amplitude[1] * turn, amplitude[2] * turn)
