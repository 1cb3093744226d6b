"""States and structures in a study file: what is wrong is told with its line, what to write, and the nearest name."""

from __future__ import annotations

import shutil
from pathlib import Path

import numpy as np
import pytest

from detune.ground.errors import BriefError, Fault
from detune.study.load import load_study

BRIEF = Path(__file__).parents[1] / "brief"
GOOD = (BRIEF / "good_study.toml").read_text(encoding="utf-8")


def with_tables(folder: Path, added: str, old: str = "", new: str = "") -> Path:
    """The good study with tables added at its end and one edit."""
    assert old in GOOD
    for name in ("rubber.csv", "spring.csv"):
        shutil.copy(BRIEF / name, folder)
    study = folder / "study.toml"
    study.write_text(GOOD.replace(old, new, 1) + "\n" + added, encoding="utf-8")
    return study


def faults_of(folder: Path, added: str, old: str = "", new: str = "") -> list[Fault]:
    study = with_tables(folder, added, old, new)
    with pytest.raises(BriefError) as caught:
        load_study(study)
    return list(caught.value.faults)


IN_STATE = ('name = "running"\nshafts', 'name = "running"\nstate = "cold"\nshafts')


def test_a_sound_state_is_read(tmp_path: Path) -> None:
    added = '[[state]]\nname = "cold"\nstiffness_factor = 1.6\nlost = ["B"]\npacking = { A = "0.5 mm" }\ncreep = 0.15\n'
    study = load_study(with_tables(tmp_path, added, *IN_STATE))
    (state,) = study.brief.states
    assert state.lost == ("B",) and state.packing == {"A": 0.5e-3} and state.creep == 0.15


@pytest.mark.parametrize(
    ("table", "found", "expected", "nearest"),
    [
        ('stiffness_factor = 1.6\nlost = ["AA"]', "AA", "the name of a station", "A"),
        ('stiffness_factor = 1.6\ngroups = ["drive"]', "drive", "the name of a group", "drive end"),
        ('packing = { Z = "1 mm" }', "Z", "the name of a station", None),
        ("stiffness_factor = -1", "-1", "a stiffness factor above zero", None),
        ('packing = { A = "1 kg" }', "1 kg", "", None),
        ("", "cold", "a state that changes something", None),
        ('lost = ["A", "A"]', "A", "each name once", None),
        ("stiffness = 2", "stiffness", "", "stiffness_factor"),
    ],
)
def test_a_state_that_is_none(
    tmp_path: Path, table: str, found: str, expected: str, nearest: str | None
) -> None:
    added = f'[[state]]\nname = "cold"\n{table}\n'
    faults = faults_of(tmp_path, added, *IN_STATE)
    (fault,) = [f for f in faults if f.where.startswith("state")]
    first = (tmp_path / "study.toml").read_text(encoding="utf-8").splitlines().index("[[state]]") + 1
    assert fault.line is not None and fault.line >= first
    assert found in fault.found and expected in fault.expected and fault.nearest == nearest


def test_a_condition_in_no_state(tmp_path: Path) -> None:
    added = '[[state]]\nname = "cool"\nstiffness_factor = 1.6\n'
    faults = faults_of(tmp_path, added, *IN_STATE)
    told = {(f.where, f.found, f.nearest) for f in faults}
    assert any("state" in key and found == "cold" and near == "cool" for key, found, near in told)


STRUCTURE = """[structure]
damping_ratio = 0.02
file = "frame.npz"
nodes = [{ name = "corner", freedoms = [0, 1, 2] }]
"""


@pytest.mark.parametrize(
    ("stiffness", "changes", "expected"),
    [
        (None, {}, "an NPZ file that can be read"),
        (np.diag([1e6, 1e6, 0.0]), {}, "a stiffness matrix that holds the structure"),
        (np.full((3, 3), np.nan), {}, "finite numbers alone"),
        (np.diag([1e6, 2e6, 3e6]), {"[0, 1, 2]": "[0, 1, 3]"}, "freedoms from 0 to 2, or -1 where held"),
        (np.diag([1e6, 2e6, 3e6]), {"0.02": "1.5"}, "a damping ratio above 0 and below 1"),
        (np.diag([1e6, 2e6, 3e6]), {'file = "frame.npz"': 'mass = "m.mtx"'}, 'either "mass" and "stiffness"'),
    ],
)
def test_a_structure_that_is_none(
    tmp_path: Path, stiffness: np.ndarray | None, changes: dict[str, str], expected: str
) -> None:
    if stiffness is not None:
        np.savez(tmp_path / "frame.npz", mass=np.eye(3), stiffness=stiffness)
    table = STRUCTURE
    for old, new in changes.items():
        table = table.replace(old, new)
    (fault,) = [f for f in faults_of(tmp_path, table) if f.where.startswith("structure")]
    first = (tmp_path / "study.toml").read_text(encoding="utf-8").splitlines().index("[structure]") + 1
    assert fault.line is not None and fault.line >= first
    assert expected in fault.expected


def test_a_station_on_a_node(tmp_path: Path) -> None:
    np.savez(tmp_path / "frame.npz", mass=np.eye(3), stiffness=np.diag([1e6, 2e6, 3e6]))
    edit = ('name = "A"\ngroup', 'name = "A"\nto = "corner"\ngroup')
    assert load_study(with_tables(tmp_path, STRUCTURE, *edit)).brief.stations[0].to == "corner"
    wrong = ('name = "A"\ngroup', 'name = "A"\nto = "korner"\ngroup')
    (fault,) = faults_of(tmp_path, STRUCTURE, *wrong)
    assert fault.found == "korner" and fault.nearest == "corner"
