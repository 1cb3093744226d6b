"""The page on sizing: its files are made from the page, its commands run, their output and hand figures compared."""

from __future__ import annotations

import importlib.util
import re
import shlex
from pathlib import Path

import pytest

from detune.cli import main

PAGE = Path(__file__).parents[2] / "docs" / "sizing.md"
BLOCK = re.compile(r"^```\{code-block\} (\w+)\n:caption: (\S+)\n\n(.*?)^```$", re.DOTALL | re.MULTILINE)
_spec = importlib.util.spec_from_file_location("tutorial", Path(__file__).with_name("test_tutorial.py"))
assert _spec is not None and _spec.loader is not None
tutorial = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(tutorial)


def blocks(language: str, caption: str) -> list[str]:
    text = PAGE.read_text(encoding="utf-8")
    return [body for kind, name, body in BLOCK.findall(text) if (kind, name) == (language, caption)]


@pytest.mark.parametrize("caption", ["fan.toml", "skid.toml", "absorber.toml"])
def test_the_commands_print_what_the_page_says(tmp_path, monkeypatch, capsys, caption):
    monkeypatch.chdir(tmp_path)
    (study,) = blocks("toml", caption)
    Path(caption).write_text(study, encoding="utf-8")
    for text in blocks("text", "mounts.csv"):
        Path("mounts.csv").write_text(text, encoding="utf-8")
    sessions = blocks("console", caption)
    assert sessions
    for body in sessions:
        command, *rest = body.rstrip("\n").split("\n")
        at = rest.index("$ echo $?")
        arguments = shlex.split(command.removeprefix("$ "))[1:]
        assert main(arguments) == int(rest[at + 1])
        printed = capsys.readouterr()
        missing = tutorial.holds(printed.out + printed.err, rest[:at])
        assert missing is None, f"not printed: {missing}\n{printed.out}{printed.err}"


def test_hand_figures_of_the_page():
    """m g / sag = 180 * 9.80665 / 0.008 N/m is the static stiffness that the sag limit wants."""
    wanted = 180.0 * 9.80665 / 0.008 / 1e3
    assert wanted == pytest.approx(220.65, abs=0.005)
    assert pytest.approx(wanted, rel=1e-4) == 4 * 66.195 / 1.2
    # Four parts at 8, 0.01 a N/mm, 30 a unit of loss factor.
    assert pytest.approx(52.673, abs=0.001) == 4 * (8 + 0.01 * 66.195 + 30 * 0.15021)
    # Four parts of the skid at 30 and 0.05 a N/mm, two of them at 100 a unit of loss factor, all at their lower bounds.
    assert pytest.approx(136.0) == 4 * (30 + 0.05 * 50) + 2 * 100 * 0.03
    assert pytest.approx(0.107, abs=0.0005) == 150.52 / 136.0 - 1.0
