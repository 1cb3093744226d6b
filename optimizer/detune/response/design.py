"""A design by name: which part each group takes, and the ballast."""

from dataclasses import dataclass

from detune.brief.brief import Brief
from detune.parts.kinds.mount import Mount
from detune.response.ballast import NOTHING, BallastStep, box_of


@dataclass(frozen=True)
class Design:
    """One full choice: a mount for every group (in the brief's order of groups) and the ballast in kg.

    `stack` is the ballast where it is taken from a list, in pieces; else the brief says what box it is.
    """

    groups: tuple[str, ...]
    mounts: tuple[Mount, ...]
    ballast: float
    stack: BallastStep | None = None

    def __str__(self) -> str:
        parts = ", ".join(
            f"{group}: {mount.part}" for group, mount in zip(self.groups, self.mounts, strict=True)
        )
        return f"{parts}; ballast {self.ballast_name}" if self.ballast else parts

    @property
    def ballast_name(self) -> str:
        """The ballast in words: "40 kg", or "3 x cherry-k (36 kg)" of a list."""
        if self.stack is None or not self.stack.pieces:
            return f"{self.ballast:g} kg"
        return f"{self.stack.part} ({self.ballast:g} kg)"

    @property
    def parts(self) -> tuple[str, ...]:
        """Part names in the order of the groups."""
        return tuple(mount.part for mount in self.mounts)


def ballast_of(brief: Brief, design: Design) -> BallastStep:
    """Return the ballast of a design. Raises ValueError for ballast of a list that says not in which pieces."""
    if design.stack is not None:
        return design.stack
    if brief.ballast is None or design.ballast == 0.0:
        return NOTHING
    if brief.ballast.catalogs:
        raise ValueError(f"{design.ballast:g} kg of ballast without the pieces of a list it consists of")
    return box_of(brief.ballast, design.ballast)
