"""What starting up loads: nothing heavy before there is heavy work to do."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

HERE = Path(__file__).parents[1]
STUDY = HERE / "studies" / "cold-store-compressor.toml"
HEAVY = (
    "scipy",
    "matplotlib",
    "pyomo",
    "cvxpy",
    "numba",
    "jinja2",
    "rich",
    "pandas",
    "pyarrow",
    "highspy",
    "control",
)


def python(*arguments: str) -> subprocess.CompletedProcess[str]:
    path = os.pathsep.join([str(HERE / "optimizer"), os.environ.get("PYTHONPATH", "")])
    return subprocess.run(
        [sys.executable, *arguments],
        capture_output=True,
        text=True,
        timeout=120,
        cwd=HERE,
        env={**os.environ, "PYTHONPATH": path},
    )


def loaded_after(code: str) -> set[str]:
    """The heavy modules in sys.modules after this code has run in a fresh interpreter."""
    told = f"{code}\nimport sys\nprint('LOADED', *(m for m in {HEAVY!r} if m in sys.modules))"
    done = python("-c", told)
    assert done.returncode == 0, done.stderr
    (line,) = [line for line in done.stdout.splitlines() if line.startswith("LOADED")]
    return set(line.split()[1:])


def run(*arguments: str) -> str:
    """Code that runs the command line in-process and swallows its exit."""
    return (
        "from detune.cli import main\n"
        "try:\n"
        f"    code = main({list(arguments)!r})\n"
        "except SystemExit as left:\n"
        "    code = left.code\n"
        "assert code in (0, None), code"
    )


@pytest.mark.parametrize(
    "code",
    ["import detune", "import detune.cli", run("--help"), run("check", str(STUDY))],
    ids=["import detune", "import detune.cli", "--help", "check"],
)
def test_nothing_heavy_is_loaded(code: str) -> None:
    assert loaded_after(code) == set()


def test_help_does_not_even_load_numpy() -> None:
    """`detune --help` is to answer within 0.15 s; numpy alone takes most of that."""
    done = python(
        "-c", run("--help") + "\nimport sys\nprint('numpy' in sys.modules, 'pydantic' in sys.modules)"
    )
    assert done.stdout.splitlines()[-1] == "False False"


def test_help_and_check_from_the_shell() -> None:
    helped = python("-m", "detune", "--help")
    assert helped.returncode == 0
    for verb in ("check", "run"):
        assert verb in helped.stdout
    checked = python("-m", "detune", "check", str(STUDY))
    assert checked.returncode == 0, checked.stderr
    assert "Traceback" not in checked.stderr


def test_a_faulty_study_exits_with_two_and_no_traceback(tmp_path: Path) -> None:
    spoilt = (
        STUDY.read_text()
        .replace('mass = "310 kg"', 'mass = "310 kgs"')
        .replace("../catalogs", str(HERE / "catalogs"))
    )
    study = tmp_path / "study.toml"
    study.write_text(spoilt)
    done = python("-m", "detune", "check", str(study))
    assert done.returncode == 2
    told = done.stdout + done.stderr
    assert "Traceback" not in told
    assert "body[1].shapes[1].mass" in told and "310 kgs" in told and 'did you mean "310 kg"?' in told


@pytest.mark.parametrize(
    "arguments", [("check", "no-such.toml"), ("check",), ("chekc", "x.toml"), ("run", "no-such.toml")]
)
def test_wrong_use_exits_with_two_and_no_traceback(arguments: tuple[str, ...]) -> None:
    done = python("-m", "detune", *arguments)
    assert done.returncode == 2
    assert "Traceback" not in done.stdout + done.stderr
    assert done.stderr.strip() or done.stdout.strip()
