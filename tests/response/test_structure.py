"""A machine on an imported structure: a beam's matrices, reduced to modes, against the full equations."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import scipy.io
import scipy.linalg
import scipy.sparse
from pydantic import ValidationError

from detune.brief.allowable.sag import Sag
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.transmissibility import Transmissibility
from detune.brief.brief import Brief
from detune.brief.cross_check import cross_check
from detune.brief.forcing.base_motion import BaseMotion
from detune.brief.forcing.force_pulse import ForcePulse
from detune.brief.forcing.random_force import RandomForce
from detune.brief.machine import Body, InertiaTensor, Point, Station
from detune.brief.structure import Structure
from detune.parts.kinds.mount import Mount
from detune.problem.build import build
from detune.response.design import Design
from detune.response.direct import DirectMachine
from detune.response.direct_views import DirectTone
from response import law_machines

machines = law_machines.machines

TWO_PI = 2.0 * math.pi
G = 9.80665
LENGTH, EI, LINE, ELEMENTS = 4.0, 2.0e6, 60.0, 12
RATIO = 0.015


def beam() -> tuple[np.ndarray, np.ndarray]:
    """Mass and stiffness of a simply supported beam of Hermite elements (any text on finite elements).

    Freedoms: deflection and slope of each node, the end nodes' deflections left out.
    """
    h = LENGTH / ELEMENTS
    k = EI / h**3 * np.array([[12, 6 * h, -12, 6 * h], [6 * h, 4 * h * h, -6 * h, 2 * h * h],
                              [-12, -6 * h, 12, -6 * h], [6 * h, 2 * h * h, -6 * h, 4 * h * h]])  # fmt: skip
    m = LINE * h / 420 * np.array([[156, 22 * h, 54, -13 * h], [22 * h, 4 * h * h, 13 * h, -3 * h * h],
                                   [54, 13 * h, 156, -22 * h], [-13 * h, -3 * h * h, -22 * h, 4 * h * h]])  # fmt: skip
    size = 2 * (ELEMENTS + 1)
    mass, stiffness = np.zeros((size, size)), np.zeros((size, size))
    for e in range(ELEMENTS):
        mesh = np.ix_(range(2 * e, 2 * e + 4), range(2 * e, 2 * e + 4))
        mass[mesh] += m
        stiffness[mesh] += k
    kept = [i for i in range(size) if i not in (0, size - 2)]
    return mass[np.ix_(kept, kept)], stiffness[np.ix_(kept, kept)]


MASS_MATRIX, STIFFNESS_MATRIX = beam()


def freedom(node: int) -> int:
    """Number of the deflection of an inner node in the reduced matrices: the first deflection is left out."""
    return 2 * node - 1


LEFT, MIDDLE, RIGHT = ELEMENTS // 3, ELEMENTS // 2, 2 * ELEMENTS // 3
NODES = (
    {"name": "left", "freedoms": (-1, -1, freedom(LEFT))},
    {"name": "middle", "freedoms": (-1, -1, freedom(MIDDLE))},
    {"name": "right", "freedoms": (-1, -1, freedom(RIGHT))},
)


def structure(folder: Path, form: str = "npz", **changes: Any) -> Structure:
    """The beam from files of one form: npz, mtx (sparse) or modes."""
    stated: dict[str, Any] = {"damping_ratio": RATIO, "nodes": NODES}
    if form == "npz":
        np.savez(folder / "beam.npz", mass=MASS_MATRIX, stiffness=STIFFNESS_MATRIX)
        stated["file"] = "beam.npz"
    elif form == "mtx":
        scipy.io.mmwrite(folder / "m.mtx", scipy.sparse.coo_matrix(MASS_MATRIX))
        scipy.io.mmwrite(folder / "k.mtx", scipy.sparse.coo_matrix(STIFFNESS_MATRIX))
        stated |= {"mass": "m.mtx", "stiffness": "k.mtx"}
    else:
        values, shapes = scipy.linalg.eigh(STIFFNESS_MATRIX, MASS_MATRIX)
        np.savez(folder / "modes.npz", frequency=np.sqrt(values) / TWO_PI, shapes=shapes)
        stated["file"] = "modes.npz"
    return Structure.model_validate({**stated, **changes}, context={"folder": folder})


BODY_MASS, HALF, INERTIA = 250.0, LENGTH / 6.0, 40.0


def on_beam(built: Structure, **changes: Any) -> Brief:
    """A machine that moves up and pitches, on two unlike mounts on the beam."""
    return machines.brief_of(
        **{
            "bodies": (
                Body(
                    name="machine", free=("z", "ry"), mass=BODY_MASS, centre=(0.0, 0.0, 0.4),
                    inertia=InertiaTensor(xx=INERTIA, yy=INERTIA, zz=INERTIA),
                ),
            ),
            "points": (Point(name="P", position=(0.3, 0.0, 0.5)),),
            "stations": (
                Station(name="one", group="one", to="left", position=(-HALF, 0.0, 0.4)),
                Station(name="two", group="two", to="right", position=(HALF, 0.0, 0.4)),
            ),
            "structure": built,
            "forcing": (machines.force(17.0, 80.0, position=(0.2, 0.0, 0.4)),),
            **changes,
        }
    )  # fmt: skip


def mounts() -> tuple[Mount, Mount]:
    return machines.mount("a", 4e5, lateral=1e5, loss=0.1), machines.mount("b", 7e5, lateral=1e5, loss=0.1)


def full_equations(frequency: float) -> tuple[np.ndarray, np.ndarray]:
    """Solve the machine and the whole beam together: freedoms of the beam, then z and ry of the machine.

    The beam's damping is 2 ratio w of each of its own modes, as M Phi diag(2 z w) Phi^T M.
    """
    n = len(MASS_MATRIX)
    values, shapes = scipy.linalg.eigh(STIFFNESS_MATRIX, MASS_MATRIX)
    carried = MASS_MATRIX @ shapes
    damping = (carried * (2.0 * RATIO * np.sqrt(values))) @ carried.T
    w = TWO_PI * frequency
    matrix = np.zeros((n + 2, n + 2), dtype=complex)
    matrix[:n, :n] = STIFFNESS_MATRIX + 1j * w * damping - w**2 * MASS_MATRIX
    matrix[n, n] = -(w**2) * BODY_MASS
    matrix[n + 1, n + 1] = -(w**2) * INERTIA
    for part, node, x in zip(mounts(), (LEFT, RIGHT), (-HALF, HALF), strict=True):
        # Deflection of a mount: z - x ry less the beam's deflection under it.
        row = np.zeros(n + 2)
        row[n], row[n + 1], row[freedom(node)] = 1.0, -x, -1.0
        matrix += part.stiffness_dynamic[2] * (1.0 + 0.1j) * np.outer(row, row)
    load = np.zeros(n + 2, dtype=complex)
    load[n], load[n + 1] = 80.0, -0.2 * 80.0
    return np.linalg.solve(matrix, load), matrix


@pytest.mark.parametrize("form", ["npz", "mtx", "modes"])
@pytest.mark.parametrize("frequency", [6.0, 17.0, 90.0])
def test_response_against_the_full_equations(tmp_path: Path, form: str, frequency: float) -> None:
    brief = on_beam(
        structure(tmp_path, form), forcing=(machines.force(frequency, 80.0, position=(0.2, 0.0, 0.4)),)
    )
    found = law_machines.agreed(brief, *mounts(), rel=1e-6)
    q, _ = full_equations(frequency)
    # P lies 0.3 ahead of the centre: z - 0.3 ry.
    assert machines.value(found, "displacement") == pytest.approx(abs(q[-2] - 0.3 * q[-1]), rel=1e-8)
    tone = brief.forcing[0].tones({})
    view = DirectTone(
        DirectMachine(brief, Design(brief.groups, mounts(), 0.0)), tone, TWO_PI * np.array([[frequency]])
    )
    for name, node, x in (("one", LEFT, -HALF), ("two", RIGHT, HALF)):
        deflection = q[-2] - x * q[-1] - q[freedom(node)]
        assert view.station_deflection(name)[0, 0, 2] == pytest.approx(deflection, rel=1e-7)
    (power,) = found.power
    assert power.closing_error < 1e-9


def test_modes_against_scipy_on_the_full_matrices(tmp_path: Path) -> None:
    n = len(MASS_MATRIX)
    mass, stiffness = np.zeros((n + 2, n + 2)), np.zeros((n + 2, n + 2))
    mass[:n, :n], stiffness[:n, :n] = MASS_MATRIX, STIFFNESS_MATRIX
    mass[n, n], mass[n + 1, n + 1] = BODY_MASS, INERTIA
    for part, node, x in zip(mounts(), (LEFT, RIGHT), (-HALF, HALF), strict=True):
        row = np.zeros(n + 2)
        row[n], row[n + 1], row[freedom(node)] = 1.0, -x, -1.0
        stiffness += part.stiffness_dynamic[2] * np.outer(row, row)
    expected = np.sqrt(scipy.linalg.eigh(stiffness, mass, eigvals_only=True)) / TWO_PI
    limits = (machines.far_limit(), Separation(limit=1e-4))
    found = law_machines.agreed(on_beam(structure(tmp_path), allowables=limits), *mounts())
    assert [mode.frequency for mode in found.modes] == pytest.approx(expected, rel=1e-8)
    # The beam alone: pi^2/L^2 sqrt(EI/m) (Den Hartog, Mechanical Vibrations, sec. 4.6, from memory; recomputed).
    own = structure(tmp_path).modes.frequency[:2]
    first = math.pi / (2.0 * LENGTH**2) * math.sqrt(EI / LINE)
    assert own == pytest.approx([first, 4.0 * first], rel=2e-4)


def test_sag_of_a_machine_in_the_middle_of_a_beam(tmp_path: Path) -> None:
    # P L^3/(48 E I) under the middle of a simply supported beam, which Hermite elements give exactly; the mount beside.
    body = Body(name="machine", free=("z",), mass=BODY_MASS, centre=(0.0, 0.0, 0.4))
    brief = on_beam(
        structure(tmp_path), bodies=(body,), points=(Point(name="P", position=(0.0, 0.0, 0.4)),),
        stations=(Station(name="one", group="one", to="middle", position=(0.0, 0.0, 0.4)),),
        forcing=(machines.force(17.0),), allowables=(machines.far_limit(), Sag(at="P", limit=1.0)),
    )  # fmt: skip
    found = law_machines.agreed(brief, mounts()[0], rel=1e-6)
    weight = BODY_MASS * G
    expected = weight * LENGTH**3 / (48.0 * EI) + weight / 4e5
    assert machines.value(found, "sag") == pytest.approx(expected, rel=1e-9)


def test_modes_above_are_left_out_and_told(tmp_path: Path) -> None:
    whole = machines.value(machines.assessed(on_beam(structure(tmp_path)), *mounts()), "displacement")
    few = on_beam(structure(tmp_path, up_to="400 Hz"))
    found = law_machines.agreed(few, *mounts(), rel=1e-6)
    assert machines.value(found, "displacement") == pytest.approx(whole, rel=2e-3)
    problem = build(few, {"list": machines.catalog(*mounts())})
    kept = len(few.structure.modes.frequency)
    left = len(MASS_MATRIX) - kept
    assert 0 < kept < len(MASS_MATRIX)
    assert any(
        f"structure: {left} modes above" in note and f"({kept} are kept)" in note for note in problem.assumed
    )


@pytest.mark.parametrize("kind", ["noise", "pulse", "passage"])
def test_noise_pulse_and_passage_batch_equals_assessor(tmp_path: Path, kind: str) -> None:
    forcing: dict[str, Any] = {
        "noise": RandomForce(
            name="jet",
            position=(0.1, 0, 0.4),
            direction="z",
            duration=60.0,
            break_points=((3.0, 4.0), (120.0, 1.0)),
        ),
        "pulse": ForcePulse(
            name="hit", position=(0.1, 0, 0.4), force=(0.0, 0.0, 500.0), shape="half-sine", duration=0.02
        ),
        "passage": machines.unbalance(2e-3, position=(0.1, 0.0, 0.4), axis="y"),
    }
    brief = on_beam(
        structure(tmp_path, up_to="200 Hz"), forcing=(forcing[kind],), conditions=law_machines.conditions(kind),
        allowables=(*law_machines.LIMITS[:2], *law_machines.LIMITS[4:6]),
    )  # fmt: skip
    law_machines.agreed(brief, *mounts(), rel=2e-4)


def refusal(folder: Path, **stated: Any) -> str:
    with pytest.raises(ValidationError) as caught:
        Structure.model_validate(
            {"damping_ratio": RATIO, "nodes": NODES, **stated}, context={"folder": folder}
        )
    return str(caught.value)


def test_matrices_that_are_none(tmp_path: Path) -> None:
    def written(**arrays: np.ndarray) -> dict[str, str]:
        np.savez(tmp_path / "x.npz", **arrays)
        return {"file": "x.npz"}

    size = len(MASS_MATRIX)
    floating = np.diag(np.r_[0.0, np.ones(size - 1)])
    lame = MASS_MATRIX.copy()
    lame[0, 1] *= 2.0
    holed = STIFFNESS_MATRIX.copy()
    holed[3, 3] = np.nan
    for arrays, expected in (
        (
            {"mass": np.diag(np.r_[0.0, np.ones(size - 1)]), "stiffness": STIFFNESS_MATRIX},
            "positive definite mass",
        ),
        ({"mass": np.eye(size), "stiffness": floating}, "a stiffness matrix that holds the structure"),
        ({"mass": lame, "stiffness": STIFFNESS_MATRIX}, "a symmetric matrix"),
        ({"mass": MASS_MATRIX, "stiffness": holed}, "finite numbers alone"),
        (
            {"mass": MASS_MATRIX, "stiffness": STIFFNESS_MATRIX[:-1, :-1]},
            "two square matrices of the same size",
        ),
        ({"mass": MASS_MATRIX[0], "stiffness": STIFFNESS_MATRIX}, "two square matrices of the same size"),
        ({"mass": MASS_MATRIX}, '"frequency" and "shapes", or "mass" and "stiffness"'),
        ({"frequency": np.array([10.0, np.nan]), "shapes": np.ones((size, 2))}, "finite numbers alone"),
        ({"frequency": np.array([0.0, 5.0]), "shapes": np.ones((size, 2))}, 'positive "frequency"'),
        ({"frequency": np.array([]), "shapes": np.ones((size, 0))}, 'positive "frequency"'),
        ({"frequency": np.array([4.0]), "shapes": np.ones((size, 2))}, 'positive "frequency"'),
    ):
        assert expected in refusal(tmp_path, **written(**arrays)), expected


def test_files_that_are_none(tmp_path: Path) -> None:
    (tmp_path / "text.npz").write_text("no archive\n")
    (tmp_path / "empty.npz").write_bytes(b"")
    (tmp_path / "cut.npz").write_bytes(b"PK\x03\x04 cut off")
    np.save(tmp_path / "single.npy", MASS_MATRIX)
    (tmp_path / "single.npz").write_bytes((tmp_path / "single.npy").read_bytes())
    for name in ("missing.npz", "text.npz", "empty.npz", "cut.npz", "single.npz"):
        message = refusal(tmp_path, file=name)
        assert name in message and "an NPZ file that can be read" in message, name
    (tmp_path / "bad.mtx").write_text("%%MatrixMarket matrix coordinate real general\n2 2 1\n1 one 3\n")
    for name in ("missing.mtx", "bad.mtx"):
        assert "a Matrix Market file that can be read" in refusal(tmp_path, mass=name, stiffness=name)
    assert 'either "mass" and "stiffness"' in refusal(tmp_path)
    assert 'either "mass" and "stiffness"' in refusal(tmp_path, mass="m.mtx")
    assert 'either "mass" and "stiffness"' in refusal(tmp_path, file="x.npz", mass="m.mtx", stiffness="k.mtx")


def test_values_that_make_no_structure(tmp_path: Path) -> None:
    structure(tmp_path)
    good = {"file": "beam.npz"}
    assert "a damping ratio above 0 and below 1" in refusal(tmp_path, **good, damping_ratio=0.0)
    assert "at least one mode of the structure below it" in refusal(tmp_path, **good, up_to="1 Hz")
    outside = ({"name": "left", "freedoms": (-1, -1, 24)},)
    assert "freedoms from 0 to 23, or -1 where held" in refusal(tmp_path, **good, nodes=outside)
    assert "freedoms from 0 to 23" in refusal(
        tmp_path, **good, nodes=({"name": "left", "freedoms": (-2, 0, 1)},)
    )


def test_names_and_floor_motion_across_statements(tmp_path: Path) -> None:
    built = structure(tmp_path)
    lost = on_beam(built)
    stations = (lost.stations[0].model_copy(update={"to": "lefd"}), lost.stations[1])
    (finding,) = cross_check(lost.model_copy(update={"stations": stations}))
    assert finding.path == ("station", 0, "to") and finding.nearest == "left"
    twice = ({"name": "machine", "freedoms": (-1, -1, 3)}, *NODES, NODES[0])
    named = [f.path for f in cross_check(on_beam(structure(tmp_path, nodes=twice)))]
    assert named == [("structure", "nodes", 0, "name"), ("structure", "nodes", 4, "name")]
    road = BaseMotion(name="road", frequency=10.0, direction="z", displacement=1e-3)
    finding = cross_check(on_beam(built, forcing=(road,)))[0]
    assert (
        finding.path == ("forcing", 0)
        and "how the supports that hold it move is not stated" in finding.expected
    )
    ratio = Transmissibility(of="motion", at="P", direction="z", limit=1.0)
    finding = cross_check(on_beam(built, allowables=(ratio,)))[0]
    assert finding.path == ("allowable", 0)
