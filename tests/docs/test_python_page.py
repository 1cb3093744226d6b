"""The page docs/python.md, run from top to bottom, with the fan's numbers worked out by hand."""

from __future__ import annotations

import math
import re
from pathlib import Path
from typing import Any

import pytest

PAGE = Path(__file__).parents[2] / "docs" / "python.md"
BLOCK = re.compile(r"^```\{code-block\} python\n:caption: (\w+)\n\n(.*?)^```$", re.DOTALL | re.MULTILINE)
AXES = ("z", "x")
RATES = [f"stiffness_{axis}_{kind} [N/mm]" for axis in AXES for kind in ("static", "dynamic")]
HEADERS = ["part", "family", *RATES, "loss_factor", "load_min [N]", "load_max [N]", "pulls", "cost"]
ROWS = ["rowan-a,rubber,50,60,40,50,0.1,100,800,no,9", "rowan-b,rubber,300,360,200,240,0.1,100,1500,no,5"]
LIST = "\n".join([",".join(HEADERS), *ROWS, ""])


def test_the_page_from_top_to_bottom(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    (tmp_path / "mounts.csv").write_text(LIST, encoding="utf-8")
    monkeypatch.chdir(tmp_path)
    space: dict[str, Any] = {}
    blocks = BLOCK.findall(PAGE.read_text(encoding="utf-8"))
    assert [name for name, _ in blocks] == ["state", "run", "change", "judge"]
    for name, code in blocks:
        exec(compile(code, f"python.md, {name}", "exec"), space)
    assert "0 feet: rowan-a 27.0" in capsys.readouterr().out
    # Heave of 120 kg on three mounts of 60 N/mm dynamic: sqrt(180e3/120)/(2 pi) = 6.164 Hz; on three of 360 N/mm
    # 15.10 Hz. The centre stands above the middle of the feet, so heave and pitch do not couple.
    answer = space["result"].answer
    heave = next(mode.frequency for mode in answer.modes if mode.name == "heave")
    assert heave == pytest.approx(math.sqrt(180e3 / 120) / (2 * math.pi), rel=1e-6)
    assert space["table"]["heave"] == pytest.approx(math.sqrt(1080e3 / 120) / (2 * math.pi), rel=1e-6)
    # 20 um are met by rowan-a: the unbalance moves the mass by about U/m = 400e-6/120 = 3.3 um far above its modes.
    (row,) = (row for row in answer.margins if row.kind == "displacement")
    assert 3.3e-6 < row.value < 20e-6
    assert space["costs"] == [27.0, 27.0]
    assert space["front"] == [(answer.cost, answer.separation)] or len(space["front"]) > 1
    assert (space["all_costs"] >= answer.cost).all()
