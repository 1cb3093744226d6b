"""Scatter of real parts, machine and forcing: what may differ from the listed values, and by how much."""

from typing import Any, Literal

from pydantic import field_validator, model_validator

from detune.brief.shares import Share
from detune.brief.statement import Length, Ratio, Statement, refuse

Interval = Share | tuple[Share, Share]
LISTED = "listed"
LARGEST = 0.9
COMMON_DAMPING = 0.30


class PartScatter(Statement):
    """Scatter of a figure of parts: `lot`, all parts of one number together, and `part`, each station alone.

    Each is a ratio, plus and minus, or a pair of deviations such as ["-10 %", "20 %"]. Both may be stated: the
    factor of a part is then the factor of its lot times its own. "listed" takes the tolerance of each row of the list.
    """

    lot: Literal["listed"] | Interval | None = None
    part: Literal["listed"] | Interval | None = None

    @field_validator("lot", "part")
    @classmethod
    def _possible(cls, value: Any) -> Any:
        return value if value is None or value == LISTED else _interval(value)

    @model_validator(mode="after")
    def _something(self) -> "PartScatter":
        if self.lot is None and self.part is None:
            raise refuse("no scatter", 'a scatter by "lot", by "part", or both ("0 %" is an answer)')
        return self


class Scatter(Statement):
    """What scatters, and how it is judged.

    `judge = "interval"`: every limit has to hold for every value within the intervals, guaranteed over the whole
    speed range. `judge = "distribution"`: the share of machines that meet the brief (yield), from `samples` drawn by
    a Sobol sequence with factors `distribution` "lognormal" (the interval is plus and minus three standard deviations,
    and not cut off) or "uniform", with its confidence interval at `confidence`.

    `stiffness` left out: each part's listed tolerance, by lot. `damping` left out: loss factor and viscous
    coefficient plus or minus 30 % by lot. `mass`: of every body. `centre`: deviation of each body's mass centre
    along x, y and z, plus and minus. `forcing`: amplitude of everything that forces the machine.
    """

    judge: Literal["interval", "distribution"]
    stiffness: PartScatter | None = None
    damping: PartScatter | None = None
    mass: Interval | None = None
    centre: tuple[Length, Length, Length] | None = None
    forcing: Interval | None = None
    distribution: Literal["lognormal", "uniform"] | None = None
    samples: int | None = None
    confidence: Ratio = 0.95

    @field_validator("mass", "forcing")
    @classmethod
    def _possible(cls, value: Any) -> Any:
        return value if value is None else _interval(value)

    @field_validator("centre")
    @classmethod
    def _widths(cls, value: tuple[float, float, float] | None) -> tuple[float, float, float] | None:
        if value is not None and min(value) < 0.0:
            raise refuse(f"{min(value):g} m", "deviations of zero or more, each taken plus and minus")
        return value

    @field_validator("samples", mode="before")
    @classmethod
    def _count(cls, value: object) -> object:
        whole = isinstance(value, int) and not isinstance(value, bool)
        if value is not None and not (whole and 16 <= int(value) <= 2**17):  # type: ignore[call-overload]
            raise refuse(value, "a whole number of samples from 16 to 131072, best a power of two")
        return value

    @model_validator(mode="after")
    def _fits_together(self) -> "Scatter":
        if not 0.5 <= self.confidence < 1.0:
            raise refuse(f"{self.confidence:g}", "a confidence from 50 % to below 100 %", at="confidence")
        if self.damping is not None and LISTED in (self.damping.lot, self.damping.part):
            raise refuse(LISTED, "a ratio: parts lists state a tolerance of stiffness alone", at="damping")
        if self.judge == "interval":
            for key in ("distribution", "samples"):
                if getattr(self, key) is not None:
                    raise refuse(
                        key, f'no "{key}" with judge = "interval", which holds for every value', at=key
                    )
        elif self.distribution is None:
            raise refuse("no distribution", 'distribution = "lognormal" or "uniform"', at="distribution")
        return self

    def assumed(self) -> tuple[str, ...]:
        """Return what is filled in for this statement, in words."""
        notes = []
        if self.stiffness is None:
            notes.append("scatter of stiffness: each part's listed tolerance, by lot")
        if self.damping is None:
            notes.append(
                f"scatter of damping: plus or minus {100 * COMMON_DAMPING:g} % by lot (common practice for "
                "loss factors)"
            )
        exact = [name for name in ("mass", "centre", "forcing") if getattr(self, name) is None]
        if exact:
            notes.append(
                f"scatter: {', '.join(exact)} exactly as stated in the brief, since no scatter of it is stated"
            )
        if self.judge == "distribution" and self.samples is None:
            notes.append(f"yield: {self.sample_count} samples")
        return tuple(notes)

    @property
    def sample_count(self) -> int:
        """Number of samples of a yield."""
        return 1024 if self.samples is None else self.samples


def _interval(value: float | tuple[float, float]) -> tuple[float, float]:
    low, high = value if isinstance(value, tuple) else (-value, value)
    if not isinstance(value, tuple) and value < 0.0:
        raise refuse(f"{100 * value:g} %", "a scatter of zero or more, taken plus and minus")
    if low > high:
        raise refuse(f"{100 * low:g} % to {100 * high:g} %", "the lower deviation first, the upper second")
    if low > 0.0 or high < 0.0:
        raise refuse(
            f"{100 * low:g} % to {100 * high:g} %", "an interval that contains the listed value (0 %)"
        )
    if low < -LARGEST or high > LARGEST:
        raise refuse(
            f"{100 * low:g} % to {100 * high:g} %", f"deviations within plus and minus {100 * LARGEST:g} %"
        )
    return low, high


def interval_of(value: Interval | None) -> tuple[float, float]:
    """Return a stated scatter as lowest and highest deviation (ratios), zeros where nothing is stated."""
    if value is None:
        return 0.0, 0.0
    return value if isinstance(value, tuple) else (-value, value)
