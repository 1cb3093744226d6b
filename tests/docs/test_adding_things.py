"""The worked examples of docs/adding-things.md: their files are loaded as they stand there and a study is run."""

from __future__ import annotations

import importlib.util
import math
import re
import sys
from pathlib import Path
from types import ModuleType

import pytest

from detune.brief import allowable, forcing
from detune.ground.errors import BriefError
from detune.parts import kinds
from detune.report.plots import PLOTS
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.solvers import SOLVERS
from detune.study.load import load_study
from detune.study.named import named_design
from detune.study.run import run_study
from small_studies import limit, mass_on_mounts, mount_list, parts_from, study_text, table, tone, written

PAGE = Path(__file__).parents[2] / "docs" / "adding-things.md"
BLOCK = re.compile(r"^```\{code-block\} (\w+)\n:caption: ([^\n]+)\n\n(.*?)^```$", re.DOTALL | re.MULTILINE)

# A mass that moves up and down on one part: m = 100 kg, k = 100 N/mm, loss factor 0.1.
LIST = mount_list("rowan-x,rubber,100,100,0.1,0,2000,yes,15,10")
FORCE = tone("12 Hz", "50 N")
MOTION = limit("displacement", "1 mm", at="bottle")


def one_mass(forcing: str, allowable: str, **condition: object) -> str:
    return study_text(
        "One mass",
        mass_on_mounts("100 kg", stations={"foot": 0.0}, body="mass", point="bottle"),
        table("condition", name="running", **condition),
        f"{forcing}\n{allowable}\n",
        parts_from("mounts"),
    )


def block(language: str, caption: str) -> str:
    found = [
        body
        for kind, name, body in BLOCK.findall(PAGE.read_text(encoding="utf-8"))
        if (kind, name) == (language, caption)
    ]
    assert len(found) == 1, caption
    return str(found[0])


def loaded(caption: str, folder: Path) -> ModuleType:
    """The module of a code block of the page, from a file of its name."""
    name = "detune." + caption.removesuffix(".py").replace("/", ".")
    path = folder / caption.rpartition("/")[2]
    path.write_text(block("python", caption), encoding="utf-8")
    spec = importlib.util.spec_from_file_location(name, path)
    assert spec is not None and spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules[name] = module
    spec.loader.exec_module(module)
    return module


def register(
    monkeypatch: pytest.MonkeyPatch, folder: Path, kind: ModuleType, file: str, registry: str
) -> None:
    """Do what the page says: the one line of the table, read from the page."""
    ((name, home),) = re.findall(
        r'^        "([\w-]+)": "([\w.]+)",$', block("python", registry), re.MULTILINE
    )
    package = kind.__name__
    monkeypatch.setitem(sys.modules, f"{package}.{home.partition('.')[0]}", loaded(file, folder))
    homes = {known: kind.KINDS.home(known) for known in kind.KINDS}
    monkeypatch.setattr(kind.KINDS, "_homes", homes | {name: home})


def judged(folder: Path, text: str) -> Assessment:
    """Run the study; solver and assessor must agree, and the assessment of the only design is returned."""
    study = load_study(written(folder, text, mounts=LIST))
    assessment = assess(study.brief, named_design(study.brief, study.catalogs, "feet=rowan-x"))
    result = run_study(study)
    assert (result.answer is not None) == assessment.meets
    return assessment


def test_a_new_allowable(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    register(monkeypatch, tmp_path, allowable, "brief/allowable/jerk.py", "brief/allowable/__init__.py")
    text = one_mass(FORCE, block("toml", "jerk in a study"))
    assessment = judged(tmp_path, text)
    # X = F / |k (1 + j eta) - m w^2|, jerk w^3 X (definition), with numbers worked out here.
    omega = 2 * math.pi * 12
    moved = 50 / abs(1e5 * (1 + 0.1j) - 100 * omega**2)
    (row,) = (row for row in assessment.margins if row.kind == "jerk")
    assert moved * 1e3 == pytest.approx(0.1067, abs=5e-5)
    assert row.value == pytest.approx(omega**3 * moved, rel=1e-9)
    assert row.value == pytest.approx(45.74, abs=0.005)
    assert row.margin == pytest.approx(-0.125, abs=5e-4)
    assert not assessment.meets
    assert judged(tmp_path, text.replace("40 m/s^3", "50 m/s^3")).meets
    # Faults come as for every other kind.
    (tmp_path / "study.toml").write_text(text.replace('"40 m/s^3"', '"40 m/s^2"'), encoding="utf-8")
    with pytest.raises(BriefError, match="jerk"):
        load_study(tmp_path / "study.toml")


def test_a_new_forcing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    register(monkeypatch, tmp_path, forcing, "brief/forcing/blade_passing.py", "brief/forcing/__init__.py")
    shafts = {"shaft": ["1200 rpm", "1200 rpm"]}
    text = one_mass(block("toml", "blades in a study"), MOTION, shafts=shafts)
    (row,) = (row for row in judged(tmp_path, text).margins if row.kind == "displacement")
    force = 8 * (1200 / 1450) ** 2
    moved = force / abs(1e5 * (1 + 0.1j) - 100 * (2 * math.pi * 100) ** 2)
    assert force == pytest.approx(5.479, abs=5e-4)
    assert moved * 1e6 == pytest.approx(0.1391, abs=5e-5)
    assert row.value == pytest.approx(moved, rel=1e-9)
    # Down to 60 rev/min the blades pass the mount's 5.033 Hz: at resonance the motion is F / (eta k).
    wide = text.replace('"1200 rpm", "1200 rpm"', '"30 rpm", "1450 rpm"')
    (row,) = (row for row in judged(tmp_path, wide).margins if row.kind == "displacement")
    own = math.sqrt(1e5 / 100)
    peak = 8 * (own / (2 * math.pi * 5 * 1450 / 60)) ** 2 / (0.1 * 1e5)
    assert row.value == pytest.approx(peak, rel=6e-3)
    assert row.frequency == pytest.approx(own / (2 * math.pi * 5), rel=0.02)
    faulty = text.replace("blades = 5", "blade = 5")
    (tmp_path / "study.toml").write_text(faulty, encoding="utf-8")
    with pytest.raises(BriefError, match="did you mean"):
        load_study(tmp_path / "study.toml")


def test_what_the_page_says_a_module_holds() -> None:
    """The names in the page's table are those that the modules of each folder have."""
    rows = re.findall(
        r"^\| a ([\w ]+) \| `([\w/]+)` \|.*\| ([^|]*) \|$", PAGE.read_text(encoding="utf-8"), re.MULTILINE
    )
    named = {what: re.findall(r"`(\w+)`", holds) for what, _, holds in rows}
    for what, modules in (("kind of part", kinds.KINDS), ("solver", SOLVERS), ("plot", PLOTS)):
        for module in modules.values():
            for name in named[what]:
                assert hasattr(module, name), (what, module, name)
