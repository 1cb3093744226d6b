"""The bill of materials of one design: what to buy, how many of it, and at which price. For assessor and report."""

from dataclasses import dataclass

from detune.brief.brief import Brief
from detune.parts.prices import Breaks
from detune.response.design import Design, ballast_of


@dataclass(frozen=True)
class BillRow:
    """One part number: what it is, the groups that take it, how many (or kg of a box), price of each, cost,
    stock.

    `price` is that of the quantity bought. `catalog` is empty for a box of ballast, which no list states.
    """

    what: str
    part: str
    catalog: str
    groups: tuple[str, ...]
    quantity: float
    price: float
    stock: int | None

    @property
    def cost(self) -> float:
        return self.quantity * self.price

    @property
    def by_weight(self) -> bool:
        """Whether the quantity is in kg."""
        return self.catalog == "" and self.what == "ballast"


@dataclass
class _Bought:
    single: float
    breaks: Breaks
    stock: int | None
    quantity: int = 0
    groups: tuple[str, ...] = ()

    def more(self, quantity: int, group: str) -> None:
        self.quantity += quantity
        self.groups = tuple(dict.fromkeys((*self.groups, group)))

    @property
    def price(self) -> float:
        reached = [price for least, price in self.breaks if self.quantity >= least]
        return reached[-1] if reached else self.single


def bill(brief: Brief, design: Design) -> tuple[BillRow, ...]:
    """Return the bill of a design: mounts and absorbers in the order of the groups, then dampers, then
    ballast.

    The same part number in several groups is one row, and its quantity counts together for its price.
    """
    bought: dict[tuple[str, str, str], _Bought] = {}
    for station in brief.every_station:
        mount = design.mounts[design.groups.index(station.group)]
        if mount.pieces:
            what = "absorber" if mount.moving_mass > 0.0 else "mount"
            single = (mount.cost - mount.damper_cost) / mount.pieces
            own = _Bought(single, mount.cost_breaks, mount.stock)
            row = bought.setdefault((what, mount.catalog, mount.base or mount.part), own)
            row.more(station.parallel * mount.pieces, station.group)
        if mount.damper:
            own = _Bought(mount.damper_cost, mount.damper_breaks, mount.damper_stock)
            row = bought.setdefault(("damper", mount.damper_catalog, mount.damper), own)
            row.more(station.parallel, station.group)
    rows = [
        BillRow(what, part, catalog, each.groups, each.quantity, each.price, each.stock)
        for (what, catalog, part), each in bought.items()
    ]
    rows.sort(key=lambda row: row.what == "damper")
    return (*rows, *_ballast(brief, design))


def _ballast(brief: Brief, design: Design) -> list[BillRow]:
    if brief.ballast is None or design.ballast == 0.0:
        return []
    step = ballast_of(brief, design)
    if step.listed:
        price = step.cost / step.pieces
        return [BillRow("ballast", step.row, step.catalog, (), step.pieces, price, step.stock)]
    return [BillRow("ballast", "ballast", "", (), step.mass, brief.ballast.cost_per_kg, None)]
