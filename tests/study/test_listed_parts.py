"""Pads, ballast and absorbers from lists: a small study of each, from its file to answer, report and named design.

The expected answers are found by going through all choices with formulas written out here.
"""

from __future__ import annotations

import csv
import io
import itertools
import math
from pathlib import Path

import numpy as np
import pytest

from detune.cli import main
from detune.ground.errors import BriefError
from detune.report.folder import write_folder
from detune.response.assess import assess
from detune.solvers.outcome import Settings
from detune.study.load import load_study
from detune.study.named import named_design
from detune.study.run import Result, run_study
from detune.study.vary import vary_study
from small_studies import catalog, limit, mass_on_mounts, mount_list, place, study_text, table, tone, written

G = 9.80665
MOUNTS = mount_list(
    "elm-a,rubber,100,120,0.1,0,5000,yes,15,20",
    "elm-b,rubber,200,240,0.1,0,5000,yes,15,26",
    "elm-c,rubber,400,480,0.1,0,5000,yes,15,31",
)
DYNAMIC = {"elm-a": (240e3, 40.0), "elm-b": (480e3, 52.0), "elm-c": (960e3, 62.0)}


def machine(mass: str, frequency: str | list[str], force: str, most: str, *tables: str) -> str:
    """A mass on two feet under a shaker, its motion limited, with the list of mounts and further tables."""
    return study_text(
        "Small",
        mass_on_mounts(mass, stations={"A": -0.4, "B": 0.4}, point="top", centre=0.4, top=0.6),
        table("condition", name="running"),
        tone(frequency, force, at=0.4),
        limit("displacement", most, at="top"),
        table("objectives", trade=["cost", "separation"]),
        catalog("mounts"),
        *tables,
    )


def run_it(path: Path) -> Result:
    return run_study(load_study(path), Settings())


def answer(result: Result) -> tuple[float, tuple[str, ...], str]:
    assert result.answer is not None
    design = result.answer.design
    return result.answer.cost, design.parts, "" if design.stack is None else design.stack.part


def pages(result: Result, folder: Path) -> dict[str, str]:
    """Every text file of the result folder by name."""
    write_folder(result, folder, overwrite=True)
    return {path.name: path.read_text(encoding="utf-8") for path in folder.iterdir() if path.is_file()}


def rows_of(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text)))


# Pads.

PADS = """\
part,family,modulus [MPa],modulus_shear [MPa],shape_constant,dynamic_to_static,loss_factor,thickness [mm],\
sheet_width [mm],sheet_length [mm],cut_min [mm],shape_max,pressure_max [MPa],strain_max [%],cost_per_m2,tolerance [%]
sheet-n,rubber,2.2,0.64,0.73,1.3,0.12,20,500,1000,30,2,1.0,15,800,15
sheet-s,rubber,1.5,0.45,0.85,1.2,0.08,12.5,500,1000,30,3,0.8,12,500,15
"""
SIZES = [(40, 40), (40, 60), (60, 60), (60, 90), (90, 90), (20, 60)]
PAD_STUDY = machine(
    "160 kg",
    "50 Hz",
    "400 N",
    "0.035 mm",
    catalog("pads", kind="pad"),
    table(
        "choice",
        group="feet",
        catalogs=["pads"],
        sizes=[[f"{width} mm", f"{length} mm"] for width, length in SIZES],
    ),
)


def pads_by_hand() -> list[tuple[float, str]]:
    """Cost and name of every pad that meets: E_c = E0 (1 + 2 k S^2), S = a b / (2 h (a + b)), K = E_c A / h."""
    found = []
    sheets = (
        ("sheet-n", 2.2e6, 0.73, 1.3, 0.12, 0.020, 2.0, 1.0e6, 0.15, 800.0),
        ("sheet-s", 1.5e6, 0.85, 1.2, 0.08, 0.0125, 3.0, 0.8e6, 0.12, 500.0),
    )
    for (name, e0, shape_k, ratio, eta, h, most, pressure, strain, price), (w, length) in itertools.product(
        sheets, SIZES
    ):
        a, b = w / 1e3, length / 1e3
        shape = a * b / (2.0 * h * (a + b))
        if min(w, length) < 30 or shape > most:
            continue
        static = e0 * (1.0 + 2.0 * shape_k * shape**2) * a * b / h
        load = 160.0 * G / 2.0
        omega = 2.0 * math.pi * 50.0
        moved = 400.0 / abs(2.0 * ratio * static * (1.0 + 1j * eta) - 160.0 * omega**2)
        # A pad cannot pull: its dynamic force stays below its load.
        force = ratio * static * math.hypot(1.0, eta) * moved
        if (
            load <= min(pressure * a * b, static * strain * h)
            and moved <= 0.035e-3
            and load / static + moved <= strain * h
            and force <= load
        ):
            found.append((2.0 * price * a * b, f"{name} {w} x {length} mm"))
    return sorted(found)


def test_pads_are_cut_to_the_cheapest_size_that_meets(tmp_path: Path) -> None:
    path = written(tmp_path, PAD_STUDY, mounts=MOUNTS, pads=PADS)
    result = run_it(path)
    expected = pads_by_hand()
    assert 1 < len(expected) < 8
    cost, parts, _ = answer(result)
    assert (cost, parts) == (pytest.approx(expected[0][0], rel=1e-12), (expected[0][1],))
    kept = {
        result.problem.design(result.outcome.designs, i).parts[0] for i in range(result.outcome.designs.count)
    }
    assert kept == {name for _, name in expected}
    # What cannot be cut is told, and that all stiffness is an estimate.
    dropped = {reason.mount.part: reason.filtered for reason in result.reasons if reason.filtered}
    assert "no side may be under 30 mm" in str(dropped["sheet-n 20 x 60 mm"])
    assert any("good for a first size, not for a proof" in note for note in result.problem.assumed)
    files = pages(result, tmp_path / "out")
    assert expected[0][1] in files["report.html"] and "an estimate" in files["report.html"]
    assert expected[0][1] in files["designs.csv"]
    (station, *_) = rows_of(files["stations.csv"])
    assert station["part"] == expected[0][1]
    # A named pad is judged like any other, whether or not its size is among the steps.
    study = load_study(path)
    named = assess(study.brief, named_design(study.brief, study.catalogs, f"feet={expected[0][1]}"))
    assert named.cost == pytest.approx(expected[0][0]) and named.meets
    other = named_design(study.brief, study.catalogs, "feet=sheet-n 75 x 75 mm")
    assert other.parts == ("sheet-n 75 x 75 mm",)
    with pytest.raises(BriefError, match="no side may be under 30 mm"):
        named_design(study.brief, study.catalogs, "feet=sheet-n 10 x 75 mm")


# Ballast.

PIECES = """\
part,mass [kg],length [mm],width [mm],height [mm],cost,cost_2,stock
plate-a,20,300,200,50,15,,9
plate-b,30,300,200,75,26,18,2
plate-c,55,300,300,90,70,,0
"""
BALLAST = catalog("pieces", kind="ballast") + table(
    "ballast", position=place(z=0.1), catalogs=["pieces"], pieces=3
)
BALLAST_STUDY = machine(
    "100 kg",
    "30 Hz",
    "400 N",
    "0.08 mm",
    table("choice", group="feet", catalogs=["mounts"]),
    BALLAST,
)


def stacks() -> list[tuple[str, float, float]]:
    """Name, mass and cost of every stack: three of plate-a at most, two of plate-b (stock), each at 18 from two up."""
    return [
        ("(empty)", 0.0, 0.0),
        *((f"{n} x plate-a" if n > 1 else "plate-a", 20.0 * n, 15.0 * n) for n in (1, 2, 3)),
        ("plate-b", 30.0, 26.0),
        ("2 x plate-b", 60.0, 36.0),
    ]


def ballast_by_hand(limit: float = 0.08e-3) -> list[tuple[float, str, str]]:
    omega = 2.0 * math.pi * 30.0
    found = []
    for (part, (k, price)), (name, mass, cost) in itertools.product(DYNAMIC.items(), stacks()):
        moved = 400.0 / abs(k * (1.0 + 0.1j) - (100.0 + mass) * omega**2)
        if moved <= limit:
            found.append((price + cost, part, name))
    return sorted(found)


def test_ballast_is_taken_in_pieces_at_their_price_and_stock(tmp_path: Path) -> None:
    path = written(tmp_path, BALLAST_STUDY, mounts=MOUNTS, pieces=PIECES)
    result = run_it(path)
    expected = ballast_by_hand()
    assert result.problem.count == 3 * 6
    assert result.outcome.designs.count == len(expected) > 0
    cost, parts, stack = answer(result)
    assert (cost, parts[0], stack) == expected[0]
    assert "x plate" in stack
    assert result.answer is not None and result.answer.added_mass == result.answer.design.ballast > 0.0
    assert result.answer.part_numbers == 2
    files = pages(result, tmp_path / "out")
    (first, *_) = rows_of(files["front.csv"])
    assert first["ballast pieces"] == stack and float(first["ballast [kg]"]) == result.answer.added_mass
    why = [row for row in rows_of(files["why.csv"]) if row["group"] == "ballast"]
    assert {row["part"] for row in why} == {name for name, *_ in stacks()} | {"plate-c"}
    assert (
        next(row for row in why if row["part"] == "plate-c")["filtered because"]
        == "the list states none in stock"
    )
    assert sum(int(row["of these meet"]) for row in why) == len(expected)
    assert "from height to height" in files["report.html"]
    study = load_study(path)
    named = named_design(study.brief, study.catalogs, f"feet={parts[0]}, ballast={stack}")
    assert assess(study.brief, named) == result.answer
    empty = named_design(study.brief, study.catalogs, "feet=elm-c, ballast=(empty)")
    assert empty.ballast == 0.0 and empty.stack is not None
    with pytest.raises(BriefError, match="plate-a"):
        named_design(study.brief, study.catalogs, "feet=elm-c, ballast=2 x plate-x")


def test_a_stack_stands_on_its_face_and_moves_the_centre(tmp_path: Path) -> None:
    """Three plates of 50 mm on z = 0.1 m: centre at 0.175 m, or at 0.025 m hanging from it."""
    for stack, z in (("up", 0.175), ("down", 0.025)):
        text = BALLAST_STUDY.replace("pieces = 3", f'pieces = 3\nstack = "{stack}"')
        loaded = load_study(written(tmp_path, text, mounts=MOUNTS, pieces=PIECES))
        design = named_design(loaded.brief, loaded.catalogs, "feet=elm-a, ballast=3 x plate-a")
        assert design.stack is not None
        assert design.stack.centre == pytest.approx((0.0, 0.0, z))
        assert design.stack.size == pytest.approx((0.3, 0.2, 0.15))
        # 60 kg as a block of 300 x 200 x 150 mm: 60 (0.2^2 + 0.15^2) / 12 about x.
        assert design.stack.inertia[0, 0] == pytest.approx(60.0 * (0.04 + 0.0225) / 12.0)


def test_varying_the_limit_varies_the_pieces(tmp_path: Path) -> None:
    path = written(tmp_path, BALLAST_STUDY, mounts=MOUNTS, pieces=PIECES)
    for variation in vary_study(path, "allowable[1].limit", ["0.075 mm", "0.09 mm", "0.3 mm"]):
        limit = float(variation.value.split()[0]) * 1e-3
        cost, parts, stack = answer(variation.result)
        assert (cost, parts[0], stack) == ballast_by_hand(limit)[0]


# Absorbers.

ABSORBERS = """\
part,mass [kg],mass_fixed [kg],frequency [Hz],damping_ratio,stroke [mm],tolerance [%],cost
pear-a,8,1,14,0.08,6,2,60
pear-b,8,1,16,0.08,1.5,2,40
pear-c,14,2,15,0.12,6,2,85
pear-d,4,0.5,18,0.06,6,2,45
"""
ABSORBER_STUDY = machine(
    "100 kg",
    ["15 Hz", "17 Hz"],
    "250 N",
    "0.55 mm",
    table("choice", group="feet", catalogs=["mounts"], parts=["elm-c"]),
    catalog("absorbers", kind="absorber"),
    table("absorber", name="tuned mass", at="top", direction="z", catalogs=["absorbers"], empty=True),
)


def absorbers_by_hand() -> list[tuple[float, str]]:
    """Cost and name of every absorber with which the main mass and the stroke meet, by two equations of motion."""
    found = []
    rows = (
        ("(empty)", 0.0, 0.0, 1.0, 0.0, 1.0, 0.0),
        ("pear-a", 8.0, 1.0, 14.0, 0.08, 6e-3, 60.0),
        ("pear-b", 8.0, 1.0, 16.0, 0.08, 1.5e-3, 40.0),
        ("pear-c", 14.0, 2.0, 15.0, 0.12, 6e-3, 85.0),
        ("pear-d", 4.0, 0.5, 18.0, 0.06, 6e-3, 45.0),
    )
    k = 960e3 * (1.0 + 0.1j)
    for name, m, frame, f, z, stroke, cost in rows:
        worst = slid = 0.0
        for w in 2.0 * np.pi * np.linspace(15.0, 17.0, 4001):
            wa = 2.0 * np.pi * f
            link = m * wa**2 + 2j * z * m * wa * w
            carried = link * -m * w**2 / (link - m * w**2) if m else 0.0
            x = 250.0 / (k - (100.0 + frame) * w**2 + carried)
            worst = max(worst, abs(x))
            slid = max(slid, abs(x * m * w**2 / (link - m * w**2)) if m else 0.0)
        if worst <= 0.55e-3 and slid <= stroke:
            found.append((62.0 + cost, name))
    return sorted(found)


def test_the_cheapest_absorber_that_meets_is_chosen(tmp_path: Path) -> None:
    path = written(tmp_path, ABSORBER_STUDY, mounts=MOUNTS, absorbers=ABSORBERS)
    result = run_it(path)
    expected = absorbers_by_hand()
    assert 0 < len(expected) < 4
    cost, parts, _ = answer(result)
    assert (cost, parts) == (pytest.approx(expected[0][0]), ("elm-c", expected[0][1]))
    kept = {
        result.problem.design(result.outcome.designs, i).parts[1] for i in range(result.outcome.designs.count)
    }
    assert kept == {name for _, name in expected}
    assert result.answer is not None
    assert any(mode.name.startswith("tuned mass") for mode in result.answer.modes)
    reasons = {reason.mount.part: reason for reason in result.reasons if reason.group == "tuned mass"}
    assert "stroke of the absorber" in str(reasons["pear-b"].hardest_rule)
    files = pages(result, tmp_path / "out")
    (fitted,) = rows_of(files["absorbers.csv"])
    assert fitted["part"] == expected[0][1] and float(fitted["direction z [-]"]) == 1.0
    assert "part of tuned mass" in files["designs.csv"].splitlines()[0]
    assert "Absorbers" in files["report.html"] and "damping ratio" in files["report.html"]
    study = load_study(path)
    named = named_design(study.brief, study.catalogs, f"feet=elm-c, tuned mass={expected[0][1]}")
    assert assess(study.brief, named) == result.answer
    bare = assess(study.brief, named_design(study.brief, study.catalogs, "feet=elm-c, tuned mass=(empty)"))
    assert not bare.meets and bare.added_mass == 0.0
    with pytest.raises(BriefError, match="an absorber of the study's catalogs"):
        named_design(study.brief, study.catalogs, "feet=elm-c, tuned mass=elm-a")


ADJUSTABLE = """\
part,mass [kg],mass_fixed [kg],frequency [Hz],frequency_min [Hz],frequency_max [Hz],damping_ratio,\
stroke [mm],tolerance [%],cost
pear-s,14,2,12,11,15.5,0.12,6,2,70
"""


def test_an_absorber_that_can_be_set_is_tried_at_every_tuning_in_its_range(tmp_path: Path) -> None:
    """pear-c at 15 Hz meets (see above); pear-s is the same with 12 Hz listed, and cheaper. 17 Hz is out of
    its range.
    """
    text = ABSORBER_STUDY.replace("empty = true", 'tunings = ["12 Hz", "15 Hz", "17 Hz"]')
    result = run_it(written(tmp_path, text, mounts=MOUNTS, absorbers=ADJUSTABLE))
    assert [mount.part for mount in result.problem.candidates[1]] == ["pear-s", "pear-s at 15 Hz"]
    cost, parts, _ = answer(result)
    assert (cost, parts[1]) == (62.0 + 70.0, "pear-s at 15 Hz")
    assert any("keeps mass, damping ratio and stroke" in note for note in result.problem.assumed)
    loaded = load_study(tmp_path / "study.toml")
    named = named_design(loaded.brief, loaded.catalogs, "feet=elm-c, tuned mass=pear-s at 15 Hz")
    assert assess(loaded.brief, named) == result.answer
    files = pages(result, tmp_path / "out")
    assert ">pear-s</td>" in files["report.html"]
    with pytest.raises(BriefError, match=r"can be set between 11 Hz and 15\.5 Hz"):
        named_design(loaded.brief, loaded.catalogs, "feet=elm-c, tuned mass=pear-s at 17 Hz")


def test_the_command_line_reads_runs_and_assesses(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = written(tmp_path, ABSORBER_STUDY, mounts=MOUNTS, absorbers=ABSORBERS)
    assert main(["check", str(path)]) == 0
    assert "1 absorber" in capsys.readouterr().out
    assert main(["assess", str(path), "--design", "feet=elm-c, tuned mass=pear-b"]) == 1
    assert "stroke of the absorber at tuned mass" in capsys.readouterr().out


def test_bounded_search_finds_what_enumeration_finds(tmp_path: Path) -> None:
    """Absorber, ballast and mounts at once: the masses differ from case to case, the front is the same."""
    text = ABSORBER_STUDY.replace('parts = ["elm-c"]\n', "") + BALLAST
    loaded = load_study(written(tmp_path, text, mounts=MOUNTS, absorbers=ABSORBERS, pieces=PIECES))
    one, other = (run_study(loaded, solver=name) for name in ("enumeration", "bounded search"))
    assert one.problem.count == 3 * 5 * 6 and other.outcome.record.accounted
    assert [(p.cost, p.separation) for p in one.front.points] == [
        (p.cost, p.separation) for p in other.front.points
    ]
    assert one.front.points and answer(one) == answer(other)
    assert other.outcome.record.lower_bound == math.inf


# Faults.

BAD = [
    (PAD_STUDY.replace("sizes = ", "size = "), "choice[1].size", "sizes"),
    (PAD_STUDY.replace('"40 mm", "40 mm"]', '"0 mm", "40 mm"]'), "choice[1].sizes", "above zero"),
    (PAD_STUDY.split("sizes =")[0], "choice[1]", "the sizes pads may be cut to"),
    (
        PAD_STUDY.split("sizes =")[0] + 'sizes = [["10 mm", "20 mm"]]\n',
        "choice[1].sizes",
        "a size that some sheet can be cut to",
    ),
    (BALLAST_STUDY.rstrip() + '\nsteps = ["0 kg"]\n', "ballast.steps", 'no "steps" beside "catalogs"'),
    (BALLAST_STUDY.replace("pieces = 3", "pieces = 0"), "ballast.pieces", "1 or more"),
    (
        BALLAST_STUDY.replace("pieces = 3", 'parts = ["plate-c"]\nempty = false'),
        "ballast.catalogs",
        "some piece in stock",
    ),
    (
        BALLAST_STUDY.replace('catalogs = ["pieces"]', 'catalogs = ["mounts"]'),
        "ballast.catalogs[1]",
        "a ballast list",
    ),
    (
        BALLAST_STUDY.replace('catalogs = ["pieces"]', 'catalogs = ["piece"]'),
        "ballast.catalogs[1]",
        'the name of a catalog ("mounts", "pieces")',
    ),
    (BALLAST_STUDY.split('catalogs = ["pieces"]')[0], "ballast", '"size", which has no default'),
    (
        ABSORBER_STUDY.replace(
            'at = "top"\ndirection = "z"\ncatalogs', 'at = "tip"\ndirection = "z"\ncatalogs'
        ),
        "absorber[1].at",
        "the name of a point",
    ),
    (
        ABSORBER_STUDY.replace('name = "tuned mass"', 'name = "feet"'),
        "absorber[1].name",
        "a name that no body",
    ),
    (
        ABSORBER_STUDY.replace('catalogs = ["absorbers"]', 'catalogs = ["mounts"]'),
        "absorber[1].catalogs[1]",
        "an absorber list",
    ),
    (
        ABSORBER_STUDY.replace("empty = true", 'where = { frequency = { min = "30 Hz" } }'),
        "absorber[1].where",
        "a filter that some part passes",
    ),
    (
        ABSORBER_STUDY.replace("empty = true", 'tunings = ["14 Hz"]'),
        "absorber[1].tunings",
        "between frequency_min and frequency_max",
    ),
    (
        ABSORBER_STUDY + '\n[[allowable]]\nkind = "stroke"\nabsorbers = ["tuned"]\n',
        "allowable[2].absorbers[1]",
        "the name of an absorber",
    ),
]


@pytest.mark.parametrize(("study", "where", "expected"), BAD, ids=[where for _, where, _ in BAD])
def test_a_fault_names_its_place(study: str, where: str, expected: str, tmp_path: Path) -> None:
    path = written(tmp_path, study, mounts=MOUNTS, pads=PADS, pieces=PIECES, absorbers=ABSORBERS)
    with pytest.raises(BriefError) as caught:
        load_study(path)
    assert where in [fault.where for fault in caught.value.faults], [str(f) for f in caught.value.faults]
    assert any(expected in fault.expected for fault in caught.value.faults), [
        str(f) for f in caught.value.faults
    ]
