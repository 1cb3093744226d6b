"""Which freedoms a machine has, and the rows that stations and given connections have in them."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.statement import FREEDOMS
from detune.physics import rigid_body

Floats = NDArray[np.float64]
FLOOR = "floor"
STRUCTURE = "structure"


@dataclass(frozen=True)
class Frame:
    """Which column of the freedoms belongs to which direction of which body."""

    names: tuple[tuple[str, str], ...]
    references: dict[str, Floats]
    flexible_floor: bool
    nodes: dict[str, Floats]

    @property
    def count(self) -> int:
        """Number of freedoms n."""
        return len(self.names)

    def motion_rows(self, body: str, position: Floats, axes: Floats | None = None) -> Floats:
        """Rows (3, n) giving the displacement of a place on a body along the columns of `axes`."""
        turned = np.eye(3) if axes is None else axes
        if body == FLOOR:
            rows = np.zeros((3, self.count))
            if self.flexible_floor:
                rows[:, self.count - 1] = turned[2]
            return rows
        if body in self.nodes:
            return self._on_structure(body, turned)
        full = rigid_body.attachment(position - self.references[body], turned)
        return self._spread(body, full)

    def rotation_rows(self, body: str) -> Floats:
        """Rows (3, n) giving the rotation of a body about the global axes."""
        return self._spread(body, np.hstack([np.zeros((3, 3)), np.eye(3)]))

    def _on_structure(self, node: str, turned: Floats) -> Floats:
        """Rows (3, n) of a node of the structure: its shapes on the modal freedoms."""
        rows = np.zeros((3, self.count))
        columns = [column for column, (name, _) in enumerate(self.names) if name == STRUCTURE]
        rows[:, columns] = turned.T @ self.nodes[node]
        return rows

    def _spread(self, body: str, full: Floats) -> Floats:
        rows = np.zeros((3, self.count))
        for column, (name, freedom) in enumerate(self.names):
            if name == body:
                rows[:, column] = full[:, FREEDOMS.index(freedom)]
        return rows


@dataclass(frozen=True)
class StationRows:
    """One station: deflection rows (3, n) in local axes, its axes (3, 3) and how many parts share it.

    `foot` (3, n): global motion of the floor or structure under it, zero where it stands on a body.

    In a state, `factor` multiplies the part's stiffness and `packing` (m) lifts its foot; a lost
    station has no parts.
    """

    name: str
    on: str
    to: str
    group: int
    parallel: int
    bought: int
    factor: float
    packing: float
    rows: Floats
    axes: Floats
    on_floor: bool
    position: Floats
    foot: Floats

    @property
    def is_absorber(self) -> bool:
        """Whether it is the spring of an absorber, which stands on the body it moves against."""
        return self.on == self.to


@dataclass(frozen=True)
class ConnectionRows:
    """One given connection: rows (3, n) along global axes, its stiffness and damping, each (3,)."""

    name: str
    on: str
    to: str
    position: Floats
    rows: Floats
    stiffness: Floats
    stiffness_static: Floats
    hysteretic: Floats
    viscous: Floats
    on_floor: bool
