"""A small parts list to start from, and a way to spoil it."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from pathlib import Path

import pytest

# One mount, every figure easy to check by hand: 980.665 N is the weight of 100 kg (standard gravity, exact).
GOOD = {
    "part": "rowan-a",
    "family": "rubber",
    "stiffness_z_static [N/mm]": "160",
    "stiffness_z_dynamic [N/mm]": "200",
    "stiffness_x_static [N/mm]": "40",
    "stiffness_x_dynamic [N/mm]": "50",
    "loss_factor": "0.1",
    "load_min [N]": "200",
    "load_max [N]": "1200",
    "load_rated [N]": "980.665",
    "deflection_max [mm]": "12",
    "pulls": "no",
    "free_height [mm]": "40",
    "mass [kg]": "0.35",
    "cost": "24.5",
    "tolerance [%]": "15",
    "temperature_min [degC]": "-30",
    "temperature_max [degC]": "80",
    "stock": "12",
}


def parts_list(
    rows: int = 3,
    cells: Mapping[tuple[int, str], str] | None = None,
    drop: Iterable[str] = (),
    rename: Mapping[str, str] | None = None,
    add: Mapping[str, str] | None = None,
    delimiter: str = ",",
) -> str:
    """Return CSV text: `rows` good rows named rowan-a, rowan-b and so on, then changed.

    cells: (line, header) -> text, the header being line 1. add: a further header -> the text of its cells.
    """
    dropped = set(drop)
    table = {header: text for header, text in {**GOOD, **(add or {})}.items() if header not in dropped}
    names = rename or {}
    lines = [delimiter.join(names.get(header, header) for header in table)]
    for row in range(rows):
        line = row + 2
        here = {**table, "part": f"rowan-{'abcdefgh'[row]}"} if "part" in table else dict(table)
        here.update({header: text for (at, header), text in (cells or {}).items() if at == line})
        lines.append(delimiter.join(here.values()))
    return "\n".join(lines) + "\n"


@pytest.fixture
def make_list() -> Callable[..., str]:
    return parts_list


@pytest.fixture
def write(tmp_path: Path) -> Callable[[str | bytes], Path]:
    """Write text or bytes to list.csv and return its path."""

    def _write(content: str | bytes) -> Path:
        path = tmp_path / "list.csv"
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return path

    return _write
