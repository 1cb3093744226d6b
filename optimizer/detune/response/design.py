"""A design by name: which part each group takes, and the ballast."""

from dataclasses import dataclass

from detune.parts.kinds.mount import Mount


@dataclass(frozen=True)
class Design:
    """One full choice: a mount for every group (in the brief's order of groups) and the ballast in kg."""

    groups: tuple[str, ...]
    mounts: tuple[Mount, ...]
    ballast: float

    def __str__(self) -> str:
        parts = ", ".join(
            f"{group}: {mount.part}" for group, mount in zip(self.groups, self.mounts, strict=True)
        )
        return f"{parts}; ballast {self.ballast:g} kg" if self.ballast else parts

    @property
    def parts(self) -> tuple[str, ...]:
        """Part names in the order of the groups."""
        return tuple(mount.part for mount in self.mounts)
