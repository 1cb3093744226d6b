"""One requirement: an allowable in one condition at one place."""

from dataclasses import dataclass

from detune.brief.allowable.base import Allowable


@dataclass(frozen=True)
class Requirement:
    """What a margin is computed of; it carries the same labels as the assessor's rows.

    `state` names the state of the machine it is judged in, None as installed. `reading` says how damping of
    unknown kind is read, None where every kind is known.
    """

    allowable: Allowable
    condition: str
    place: str
    state: str | None = None
    reading: str | None = None

    @property
    def label(self) -> str:
        """The requirement in words: quantity, place, condition."""
        place = f" at {self.place}" if self.place != "whole machine" else ""
        read = f", {self.reading}" if self.reading is not None else ""
        return f"{self.allowable.quantity()}{place} ({self.condition}{read})"

    @property
    def is_total(self) -> bool:
        """Whether it limits a total of the design (cost, mass, part numbers) rather than a physical quantity."""
        return self.condition == "design"
