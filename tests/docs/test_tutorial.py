"""The tutorial, done as a reader would: its files are made from the page, its commands run, their output compared."""

from __future__ import annotations

import re
import shlex
from pathlib import Path

import pytest

from detune.cli import main

PAGE = Path(__file__).parents[2] / "docs" / "tutorial.md"
BLOCK = re.compile(r"^```\{code-block\} (\w+)\n:caption: (\S+)\n\n(.*?)^```$", re.DOTALL | re.MULTILINE)
RIGID = '[floor]\nkind = "rigid"\n'


def blocks(language: str, caption: str) -> list[str]:
    text = PAGE.read_text(encoding="utf-8")
    return [body for kind, name, body in BLOCK.findall(text) if (kind, name) == (language, caption)]


@pytest.fixture
def desk(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder with the files that the page has its reader write."""
    study = "\n".join(blocks("toml", "vacuum-pump.toml"))
    (floor,) = blocks("toml", "bench.toml")
    faulty = study.replace('"1380 rpm"', "1380", 1)
    faulty = faulty.replace('limit = "0.3 mm"', 'limt = "0.3 mm"')
    faulty = faulty.replace('kind = "sag"\nat = "inlet flange"', 'kind = "sag"\nat = "inlet flnge"')
    texts = {
        "pump-mounts.csv": "".join(blocks("text", "pump-mounts.csv")),
        "vacuum-pump.toml": study,
        "bench.toml": study.replace(RIGID, floor),
        "strict.toml": study.replace('limit = "1.5 N"', 'limit = "0.3 N"'),
        "faulty.toml": faulty,
    }
    for name, text in texts.items():
        (tmp_path / name).write_text(text, encoding="utf-8")
    assert len({*texts.values()}) == len(texts)
    monkeypatch.chdir(tmp_path)
    return tmp_path


def sessions(caption: str) -> list[tuple[list[str], list[str], int]]:
    """Commands of the page on one file: their arguments, the lines expected, and the exit code stated."""
    found = []
    for body in blocks("console", caption):
        command, *rest = body.rstrip("\n").split("\n")
        at = rest.index("$ echo $?")
        program, *arguments = shlex.split(command.removeprefix("$ "))
        assert program == "detune"
        found.append((arguments, rest[:at], int(rest[at + 1])))
    return found


def holds(printed: str, expected: list[str]) -> str | None:
    """Return the first expected line that the output does not hold in its place; "..." stands for anything."""
    lines = printed.split("\n")
    at = 0
    for line in expected:
        if line == "...":
            continue
        pattern = ".*".join(re.escape(piece) for piece in line.split("..."))
        while at < len(lines) and not re.fullmatch(pattern, lines[at].rstrip()):
            at += 1
        if at == len(lines):
            return line
        at += 1
    return None


def run_all(capsys: pytest.CaptureFixture[str], caption: str) -> None:
    assert sessions(caption)
    for arguments, expected, code in sessions(caption):
        assert main(arguments) == code, arguments
        printed = capsys.readouterr()
        missing = holds(printed.out + printed.err, expected)
        assert missing is None, f"{arguments}: not printed: {missing}\n{printed.out}{printed.err}"


@pytest.mark.parametrize("caption", ["faulty.toml", "bench.toml", "strict.toml"])
def test_the_commands_print_what_the_page_says(
    desk: Path, capsys: pytest.CaptureFixture[str], caption: str
) -> None:
    run_all(capsys, caption)


def test_the_study_of_the_page_its_files_and_heights(desk: Path, capsys: pytest.CaptureFixture[str]) -> None:
    run_all(capsys, "vacuum-pump.toml")
    folder = desk / "results" / "vacuum-pump"
    text = PAGE.read_text(encoding="utf-8")
    for name in re.findall(r"`([\w-]+\.(?:csv|json|html))`", text):
        assert (folder / name).is_file() or (desk / name).is_file(), name
    report = (folder / "report.html").read_text(encoding="utf-8")
    sections = re.findall(r"^\d\. \*([^*]+)\*:", text, re.MULTILINE)
    assert len(sections) == 5
    for section in sections:
        assert f"<h2>{section}" in report
    heads, *rows = (folder / "stations.csv").read_text(encoding="utf-8").splitlines()
    place = heads.split(",").index("installed height [m]")
    heights = {round(1e3 * float(row.split(",")[place]), 1) for row in rows}
    # Front and rear feet: load over four stiffnesses of 32 N/mm, 30 mm free (statics by hand: 101.9 N, 84.4 N).
    assert heights == {26.8, 27.4}


def test_hand_figures_of_the_page() -> None:
    """The estimates the page works out, again."""
    omega = 2 * 3.141592653589793 * 1450 / 60
    unbalance = 6 * 6.3e-3 / omega
    assert unbalance * 1e6 == pytest.approx(249, abs=0.5)  # g mm
    heave = (160e3 / 38) ** 0.5 / 6.283185307
    assert heave == pytest.approx(10.3, abs=0.05)
    force = unbalance * (6.283185307 * 23) ** 2
    assert force == pytest.approx(5.20, abs=0.005)
    assert force / ((23 / heave) ** 2 - 1) == pytest.approx(1.31, abs=0.005)
