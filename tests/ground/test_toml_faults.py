"""What a user reads when a study file is no TOML: the line, what stands there, what to write."""

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.ground.errors import BriefError, Fault
from detune.ground.toml_lines import load

# text, line, where (beginning), words of what is expected
BROKEN = [
    (
        "[machine]\nmass = 12,5\n",
        2,
        "machine.mass (column 10)",
        "a decimal point instead of the comma: mass = 12.5",
    ),
    ("[machine]\nmass = 12,5 kg\n", 2, "machine.mass", 'instead of the comma: mass = "12.5 kg"'),
    ("[machine]\nmass = 640 kg # heavy\n", 2, "machine.mass", 'a number with its unit: mass = "640 kg"'),
    ("stiffness = 4.2 N/mm\n", 1, "stiffness", 'stiffness = "4.2 N/mm"'),
    ('name = "rowan\nnext = 1\n', 1, "name", "a quotation mark at both ends"),
    ("a = 1\nname = 'rowan\n", 2, "name", "a quotation mark at both ends"),
    ('a = """ text\nmore\n', 1, "a", "a quotation mark at both ends"),
    ("name = rowan-c\n", 1, "name", 'quotation marks around text: name = "rowan-c"'),
    ("a = \u201cx\u201d\n", 1, "a", "straight quotation marks"),
    ("empty = True\n", 1, "empty", "true or false, in small letters"),
    ("[m]\na = 1\nb = 2\na = 3\n", 4, "m.a", "each key and each table once; it stands on line 2 already"),
    ("[m]\na.b = 1\na = 3\n", 3, "m.a", "it stands on line 2 already"),
    ("[m]\nx = 1\n[m]\ny = 2\n", 3, "m", "it stands on line 1 already"),
    ("[[a]]\nb = 1\n[a]\nc = 1\n", 3, "a", "it stands on line 1 already"),
    ("[[a]]\nb = [1, 2\nc = 3\n", 3, "a[1].c", "the list that begins on line 2, and a closing bracket ]"),
    ("x = 1\na = [1,\n2,\n", 2, "a", "the list that begins on line 2, and a closing bracket ]"),
    ("a = [1 2]\n", 1, "a", "a comma between the entries"),
    ("a = {b = 1,\n c = 2}\n", 1, "a", "closed on the same line"),
    ("a = {b = 1 c = 2}\n", 1, "a", "with commas between its keys"),
    ("[a\nb = 1\n", 1, "a", "as many closing as opening brackets"),
    ("a: 3\n", 1, "file", "an equals sign instead of the colon"),
    ("a 3\n", 1, "file", "key = value"),
    ("a =\nb = 2\n", 1, "a", "a value after the equals sign"),
    ("a = 1 2\n", 1, "a", "one value after the equals sign"),
    ("a = 01\n", 1, "a", "without zeros in front"),
    ('path = "C:\\temp\\x"\n', 1, "path", "a slash / instead of each backslash"),
    ("gr\u00f6\u00dfe = 3\n", 1, '"gr\u00f6\u00dfe"', "quotation marks around a key"),
    ("a = 1\n\x00\n", 2, "file", "key = value"),
]


def fault_of(path: Path) -> Fault:
    with pytest.raises(BriefError) as caught:
        load(path)
    (fault,) = caught.value.faults
    assert fault.file == str(path)
    return fault


@pytest.mark.parametrize(("text", "line", "where", "words"), BROKEN)
def test_broken_files(tmp_path: Path, text: str, line: int, where: str, words: str) -> None:
    path = tmp_path / "study.toml"
    path.write_text(text, encoding="utf-8")
    fault = fault_of(path)
    assert fault.line == line
    assert fault.where.startswith(where)
    assert words in fault.expected
    assert fault.found == text.split("\n")[line - 1].strip()


def test_a_missing_file_names_its_neighbour(tmp_path: Path) -> None:
    (tmp_path / "compressor.toml").write_text("", encoding="utf-8")
    fault = fault_of(tmp_path / "compresor.toml")
    assert fault.line is None
    assert fault.nearest == str(tmp_path / "compressor.toml")
    assert fault_of(tmp_path / "no" / "such.toml").nearest is None


def test_a_folder(tmp_path: Path) -> None:
    assert fault_of(tmp_path).expected == "a TOML file"


def test_bytes_of_another_encoding(tmp_path: Path) -> None:
    path = tmp_path / "old.toml"
    path.write_bytes(b"a = 1\nb = '20 \xb0C'\n")
    fault = fault_of(path)
    assert fault.line == 2
    assert fault.found == "byte 0xb0"
    assert "UTF-8" in fault.expected


def test_brackets_without_end_and_numbers_without_end(tmp_path: Path) -> None:
    path = tmp_path / "deep.toml"
    path.write_text("a = " + "[" * 100_000, encoding="utf-8")
    assert "fewer brackets" in fault_of(path).expected
    path.write_text("a = " + "1" * 5000, encoding="utf-8")
    assert "valid TOML" in fault_of(path).expected


@settings(deadline=None, max_examples=200)
@given(text=st.text(alphabet="ab[]{}=\"',.#\n 12\\", max_size=40))
def test_any_text_is_read_or_refused_with_one_fault(
    tmp_path_factory: pytest.TempPathFactory, text: str
) -> None:
    path = tmp_path_factory.getbasetemp() / "any.toml"
    path.write_text(text, encoding="utf-8")
    try:
        load(path)
    except BriefError as error:
        assert len(error.faults) == 1
