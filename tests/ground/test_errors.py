"""Faults and errors as people and other processes see them."""

import pickle

import pytest

from detune.ground.errors import BriefError, DetuneError, Fault, SolveError, nearest_name

MASS = Fault("studies/x.toml", 12, "machine.mass", "640", 'a mass with its unit, for example "640 kg"')


def test_a_fault_is_one_line() -> None:
    assert str(MASS) == (
        'studies/x.toml:12: machine.mass: found "640", expected a mass with its unit, for example "640 kg"'
    )


def test_a_fault_without_line_and_with_the_nearest_name() -> None:
    fault = Fault("x.toml", None, "part", "rowan-k", "the name of a part in the catalog", "rowan-c")
    assert str(fault) == (
        'x.toml: part: found "rowan-k", expected the name of a part in the catalog; did you mean "rowan-c"?'
    )


def test_odd_findings_stay_readable() -> None:
    assert "found nothing," in str(Fault("x.toml", 1, "a", "", "a value"))
    assert """found 'a = "x',""" in str(Fault("x.toml", 1, "a", 'a = "x', "a value"))
    assert "\n" not in str(Fault("x.toml", 1, "a", "one\ntwo", "a value"))


def test_a_brief_error_counts_and_sorts_its_faults() -> None:
    later = Fault("studies/x.toml", 40, "allowable[2].limit", "5", "a velocity")
    whole = Fault("studies/x.toml", None, "file", "", "a forcing")
    other = Fault("catalogs/a.csv", 3, "stiffness", "x", "a number")
    error = BriefError([later, MASS, whole, other])
    assert error.faults == (other, whole, MASS, later)
    lines = str(error).splitlines()
    assert lines[0] == "4 faults found:"
    assert lines[1:] == [str(other), str(whole), str(MASS), str(later)]
    assert str(BriefError([MASS])).startswith("1 fault found:\n")


def test_errors_survive_pickling() -> None:
    again = pickle.loads(pickle.dumps(BriefError([MASS])))
    assert isinstance(again, BriefError)
    assert again.faults == (MASS,)
    assert str(again) == str(BriefError([MASS]))
    assert str(pickle.loads(pickle.dumps(SolveError("no bound was reached")))) == "no bound was reached"


def test_the_family_of_errors() -> None:
    assert issubclass(BriefError, DetuneError)
    assert issubclass(SolveError, DetuneError)


@pytest.mark.parametrize(
    ("name", "known", "expected"),
    [
        ("stifness", ["stiffness", "damping"], "stiffness"),
        ("Loss Factor", ["loss_factor", "load"], "loss_factor"),
        ("loss-factor", ["loss_factor", "load"], "loss_factor"),
        ("rowan-k", ["rowan-c", "alder-a"], "rowan-c"),
        ("mpa", ["Pa", "mPa", "MPa"], "mPa"),
        ("zzz", ["stiffness", "damping"], None),
        ("anything", [], None),
        ("", ["stiffness"], None),
    ],
)
def test_nearest_name(name: str, known: list[str], expected: str | None) -> None:
    assert nearest_name(name, known) == expected
