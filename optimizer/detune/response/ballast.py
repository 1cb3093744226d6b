"""What ballast a design may take: steps of a stated box, or pieces of a parts list stacked on a face."""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.brief.choice import Ballast as BallastTable
from detune.parts.prices import price_each

if TYPE_CHECKING:
    from detune.parts.kinds.ballast import Ballast as BallastPart

Floats = NDArray[np.float64]
NO_PIECE = "(empty)"


@dataclass(frozen=True)
class BallastStep:
    """One amount of ballast: mass in kg and cost, and where its box stands: centre and size, m, of even
    density.

    Of pieces of a list: its catalog, line, the number `row` and how many `pieces` of it; stock and height of
    a piece.
    """

    mass: float
    cost: float
    size: tuple[float, float, float]
    centre: tuple[float, float, float]
    catalog: str = ""
    line: int = 0
    row: str = ""
    pieces: int = 0
    stock: int | None = None

    @property
    def listed(self) -> bool:
        """Whether it comes from a parts list, none of it included."""
        return self.catalog != ""

    @property
    def part(self) -> str:
        """What it is called: "3 x cherry-k", "40 kg" of a ladder, "(empty)" for none of a list."""
        if not self.listed:
            return f"{self.mass:g} kg"
        if self.pieces == 0:
            return NO_PIECE
        return self.row if self.pieces == 1 else f"{self.pieces} x {self.row}"

    @property
    def inertia(self) -> Floats:
        """Inertia (3, 3) about its own centre, kg m^2: m (b^2 + c^2) / 12 about the axis across b and c."""
        square = np.array(self.size) ** 2
        return np.asarray(np.diag(self.mass * (square.sum() - square) / 12.0))


NOTHING = BallastStep(0.0, 0.0, (0.0, 0.0, 0.0), (0.0, 0.0, 0.0))


def ladder(brief: Brief) -> tuple[BallastStep, ...]:
    """Return the steps a brief states, or no ballast alone."""
    table = brief.ballast
    if table is None or table.catalogs:
        return (NOTHING,)
    return tuple(box_of(table, step) for step in table.steps)


def box_of(table: BallastTable, mass: float) -> BallastStep:
    """Return so much of a stated box."""
    return BallastStep(mass, mass * table.cost_per_kg, table.size, table.position)


def none_of(table: BallastTable) -> BallastStep:
    """Return no piece of the lists."""
    return BallastStep(0.0, 0.0, (0.0, 0.0, 0.0), table.position, catalog=table.catalogs[0])


def stacked(table: BallastTable, part: "BallastPart", pieces: int) -> BallastStep:
    """Return `pieces` of one row of a list, one upon the other, at the price of so many.

    The stack is as high as all pieces together and stands on, or hangs from, the middle of the face at
    `position`.
    """
    x, y, z = table.position
    height = pieces * part.height
    middle = z + (0.5 if table.stack == "up" else -0.5) * height
    return BallastStep(
        mass=pieces * part.mass,
        cost=pieces * price_each(part, pieces),
        size=(part.length, part.width, height),
        centre=(x, y, middle),
        catalog=part.catalog,
        line=part.line,
        row=part.part,
        pieces=pieces,
        stock=part.stock,
    )
