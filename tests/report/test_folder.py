"""The result folder: what is in it, that it is strict and complete, and that nothing is lost by writing it."""

import csv
import json
import os

import pytest

from detune.report import folder as writing
from detune.report.folder import FolderExists, check_folder, write_folder
from detune.report.strict_json import json_text, plain

FILES = {
    "study.toml", "inputs.json", "answer.json", "proof.json", "proof-record.json", "front.csv", "designs.csv",
    "responses.csv",
    "margins.csv", "stations.csv", "modes.csv", "contributions.csv", "why.csv", "report.html", "plots",
}  # fmt: skip


def strict(text: str):
    def refuse(name: str):
        raise ValueError(f"{name} is not JSON")

    return json.loads(text, parse_constant=refuse)


def rows(path):
    with open(path, encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def test_folder_holds_every_file(folder, result):
    assert {path.name for path in folder.iterdir()} == FILES
    names = {path.name for path in (folder / "plots").iterdir()}
    plots = {"front", "margins", "response", "modes-speed", "stiffness-damping", "why"}
    assert names == {f"{plot}.{kind}" for plot in plots for kind in ("svg", "png")}
    assert (folder / "study.toml").read_text(encoding="utf-8") == result.study.source
    assert strict((folder / "inputs.json").read_text())["sha256"] == dict(result.study.hashes)


def test_json_is_strict_and_in_si(folder):
    answer = strict((folder / "answer.json").read_text(encoding="utf-8"))
    assert answer["answer"]["meets"] is True and answer["exit_code"] == 0
    assert answer["answer"]["design"]["mounts"][0]["part"] == "teasel-a"
    # 120 N/mm in the list.
    assert answer["answer"]["design"]["mounts"][0]["stiffness_dynamic"][2] == 120e3
    proof = strict((folder / "proof.json").read_text(encoding="utf-8"))
    assert proof["designs"] == 6 and proof["met"] == 4 and proof["accounted"]
    assert sum(rule["excluded"] for rule in proof["rules"]) + proof["met"] == 6


def test_what_is_no_number_becomes_null():
    assert plain({"a": [float("nan"), float("inf"), 1.5]}) == {"a": [None, None, 1.5]}
    assert strict(json_text({"margin": float("inf")})) == {"margin": None}
    with pytest.raises(TypeError, match="no place in a result file"):
        plain(object())


def test_csv_files_have_units_in_their_heads(folder, result):
    designs = rows(folder / "designs.csv")
    assert [
        (row["part of feet"], row["ballast [kg]"], row["cost [-]"], row["assessed"]) for row in designs
    ] == [
        ("teasel-a", "0", "80", "yes"),
        ("teasel-b", "0", "120", "no"),
        ("teasel-a", "100", "130", "yes"),
        ("teasel-b", "100", "170", "no"),
    ]
    assert [row["number"] for row in rows(folder / "front.csv")] == ["1", "2"]
    margins = rows(folder / "margins.csv")
    assert len(margins) == len(result.answer.margins)
    velocity = next(row for row in margins if row["quantity"] == "velocity z, peak")
    assert velocity["unit"] == "m/s" and float(velocity["upper limit"]) == 0.012
    station = rows(folder / "stations.csv")[0]
    # 400 kg on four mounts of 100 N/mm static: 980.665 N and 9.80665 mm each, of 60 mm free height.
    assert float(station["axial load [N]"]) == pytest.approx(980.665)
    assert float(station["compression [m]"]) == pytest.approx(9.80665e-3)
    assert float(station["installed height [m]"]) == pytest.approx(0.05019335)
    assert {row["part"] for row in rows(folder / "why.csv")} == {"teasel-a", "teasel-b", "teasel-c"}
    assert len(rows(folder / "modes.csv")) == 1
    assert {row["judged here"] for row in rows(folder / "responses.csv")} == {"yes", "no"}


def test_an_existing_folder_is_refused_with_a_plain_error(result, tmp_path):
    (tmp_path / "mine").mkdir()
    (tmp_path / "mine" / "notes.txt").write_text("keep me")
    with pytest.raises(FolderExists, match="--overwrite"):
        write_folder(result, tmp_path / "mine")
    # Even when asked, a folder that holds no result is left alone.
    with pytest.raises(FolderExists, match="not a result folder"):
        write_folder(result, tmp_path / "mine", overwrite=True)
    assert (tmp_path / "mine" / "notes.txt").read_text() == "keep me"
    with pytest.raises(FolderExists, match="no folder"):
        check_folder(tmp_path / "mine" / "notes.txt", overwrite=True)
    check_folder(tmp_path / "elsewhere")


@pytest.fixture
def light(monkeypatch):
    """No plots and no page: these tests are about the folder."""
    monkeypatch.setattr(writing, "draw_each", lambda plots, result: ())
    monkeypatch.setattr(writing, "page_text", lambda *_: "<html></html>")
    monkeypatch.setattr(writing, "responses_csv", lambda curves: "")


def test_overwriting_replaces_the_whole_result(result, tmp_path, light):
    target = write_folder(result, tmp_path / "run")
    (target / "left-over.txt").write_text("of an earlier run")
    write_folder(result, target, overwrite=True)
    assert not (target / "left-over.txt").exists() and (target / "proof.json").is_file()
    assert os.listdir(tmp_path) == ["run"]


def test_a_failure_leaves_the_earlier_result_and_nothing_half_written(result, tmp_path, light, monkeypatch):
    target = write_folder(result, tmp_path / "run")
    before = (target / "proof.json").read_bytes()

    def fails(*_):
        raise RuntimeError("the disk is full")

    monkeypatch.setattr(writing, "page_text", fails)
    with pytest.raises(RuntimeError):
        write_folder(result, target, overwrite=True)
    with pytest.raises(RuntimeError):
        write_folder(result, tmp_path / "other")
    assert os.listdir(tmp_path) == ["run"]
    assert (target / "proof.json").read_bytes() == before


def test_a_stopped_run_without_any_design_is_written_too(variant, tmp_path, light):
    target = write_folder(variant(time_limit=0.0), tmp_path / "run")
    answer = strict((target / "answer.json").read_text())
    assert answer["answer"] is None and answer["stopped"] == "time limit" and answer["none_exists"] is False
    assert not (target / "margins.csv").exists()
