"""Lines of keys in TOML files, counted by eye in the texts below."""

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.ground.toml_lines import Positions, dotted, load
from detune.ground.toml_positions import KeyPath, positions_of

TRICKY = r'''# a comment with [brackets] and key = "value"
title = "a # that is no comment [nor a table]"

[machine]            # [not.a.table]
mass = "640 kg"
centre = ["0.1 m", "0 m",
          "0.35 m"]  # ] still here
inertia.xx = "85 kg m^2"
inertia.yy = "90 kg m^2"

[machine."free directions"]
'odd key' = true
"quoted.key"."a \"b\"" = 1

[[condition]]
name = "running"
  [[condition.forcing]]
  kind = "unbalance"
  speed = { from = "980 rpm", to = "1480 rpm" }
  [[condition.forcing]]
  kind = "line"
  [condition.forcing.table]
  orders = [
    { order = 1, force = "12 N" },   # first ]
    # a comment between ] }
    { order = 2, force = "3 N" },
  ]

[[condition]]
name = "start-up"
text = """
[fake]
key = 1 """
literal = """ends in two quotes"""""
raw = """a \""" b"""
single = \'\'\'
[[also.fake]]
it\'s\'\'\'
  [[condition.forcing]]
  kind = "torque"

[a.b.c]
x = 1
[a]
y = [[1, 2], [3,
4]]
'''.replace(r"\'", "'")

LINES: list[tuple[KeyPath, int]] = [
    (("title",), 2),
    (("machine",), 4),
    (("machine", "mass"), 5),
    (("machine", "centre"), 6),
    (("machine", "centre", 1), 6),
    (("machine", "centre", 2), 7),
    (("machine", "inertia"), 8),
    (("machine", "inertia", "xx"), 8),
    (("machine", "inertia", "yy"), 9),
    (("machine", "free directions"), 11),
    (("machine", "free directions", "odd key"), 12),
    (("machine", "free directions", "quoted.key", 'a "b"'), 13),
    (("condition",), 15),
    (("condition", 0), 15),
    (("condition", 0, "name"), 16),
    (("condition", 0, "forcing"), 17),
    (("condition", 0, "forcing", 0), 17),
    (("condition", 0, "forcing", 0, "kind"), 18),
    (("condition", 0, "forcing", 0, "speed"), 19),
    (("condition", 0, "forcing", 0, "speed", "to"), 19),
    (("condition", 0, "forcing", 1), 20),
    (("condition", 0, "forcing", 1, "kind"), 21),
    (("condition", 0, "forcing", 1, "table"), 22),
    (("condition", 0, "forcing", 1, "table", "orders"), 23),
    (("condition", 0, "forcing", 1, "table", "orders", 0, "force"), 24),
    (("condition", 0, "forcing", 1, "table", "orders", 1), 26),
    (("condition", 0, "forcing", 1, "table", "orders", 1, "order"), 26),
    (("condition", 1), 29),
    (("condition", 1, "name"), 30),
    (("condition", 1, "text"), 31),
    (("condition", 1, "literal"), 34),
    (("condition", 1, "raw"), 35),
    (("condition", 1, "single"), 36),
    (("condition", 1, "forcing", 0), 39),
    (("condition", 1, "forcing", 0, "kind"), 40),
    (("a", "b"), 42),
    (("a", "b", "c", "x"), 43),
    (("a",), 44),
    (("a", "y"), 45),
    (("a", "y", 1, 0), 45),
    (("a", "y", 1, 1), 46),
]


@pytest.fixture
def tricky(tmp_path: Path) -> Path:
    path = tmp_path / "tricky.toml"
    path.write_text(TRICKY, encoding="utf-8")
    return path


@pytest.mark.parametrize(("path", "line"), LINES)
def test_lines_of_a_tricky_file(tricky: Path, path: KeyPath, line: int) -> None:
    data, positions = load(tricky)
    node: object = data
    for step in path:
        node = node[step]  # type: ignore[index]
    assert positions.line(path) == line
    assert positions.lines[path] == line


def every_path(node: object, path: KeyPath = ()) -> list[KeyPath]:
    below: list[KeyPath] = [path] if path else []
    if isinstance(node, dict):
        for key, value in node.items():
            below += every_path(value, (*path, key))
    elif isinstance(node, list):
        for index, value in enumerate(node):
            below += every_path(value, (*path, index))
    return below


def test_every_key_that_tomllib_finds_has_a_line_and_no_other(tricky: Path) -> None:
    data, positions = load(tricky)
    assert set(every_path(data)) == set(positions.lines)


def test_the_deepest_known_prefix_answers(tricky: Path) -> None:
    positions = load(tricky)[1]
    assert positions.line(("machine", "mass", "missing", 3)) == 5
    assert positions.line(("machine", "missing")) == 4
    assert positions.line(("condition", 7, "name")) == 15
    assert positions.line(("missing",)) is None
    assert positions.line(()) is None
    assert Positions().line(("a",)) is None


def test_line_ends_of_other_systems_and_a_byte_order_mark(tmp_path: Path) -> None:
    path = tmp_path / "other.toml"
    path.write_bytes(b'\xef\xbb\xbfa = 1\r\n[b]\r\nc = """x\r\ny"""\r\nd = 2')
    data, positions = load(str(path))
    assert data == {"a": 1, "b": {"c": "x\ny", "d": 2}}
    assert [positions.line(p) for p in [("a",), ("b",), ("b", "c"), ("b", "d")]] == [1, 2, 3, 5]


def test_an_empty_file(tmp_path: Path) -> None:
    path = tmp_path / "empty.toml"
    path.write_text("# nothing\n", encoding="utf-8")
    data, positions = load(path)
    assert data == {}
    assert positions.lines == {}


def test_paths_as_people_read_them() -> None:
    assert dotted(("allowable", 2, "limit")) == "allowable[3].limit"
    assert dotted(("a", "odd key", 0, 1)) == 'a."odd key"[1][2]'
    assert dotted(()) == ""


NAMES = st.sampled_from(["mass", "a", "b-2", "odd key", "dot.ted", "", 'quo"te', "ü"])
SCALARS = st.sampled_from(["1", "2.5", "true", '"# [x]"', "'}'", "2024-05-06", '"""a\n[b]\n"""', "[]", "{}"])


def written(name: str) -> str:
    return '"' + name.replace("\\", "\\\\").replace('"', '\\"') + '"'


@st.composite
def documents(draw: st.DrawFn) -> str:
    """A valid TOML document of tables, arrays of tables, arrays and inline tables; each table name once."""
    text = ""
    for table in draw(st.lists(NAMES, unique=True, max_size=3)):
        copies = draw(st.integers(0, 2))
        header = f"[[{written(table)}]]" if copies else f"[ {written(table)} ] # [c]"
        for _ in range(max(copies, 1)):
            text += header + "\n"
            for key in draw(st.lists(NAMES, unique=True, max_size=3)):
                value = draw(SCALARS)
                form = draw(
                    st.sampled_from(
                        ["{v}", "[{v},\n # ]\n {v} ]", "{{ a = {v}, b.c = {v} }}", "[[{v}],\n[{v}],]"]
                    )
                )
                text += f"{written(key)} = " + form.format(v=value) + "\n\n"
    return text


@settings(deadline=None, max_examples=150)
@given(text=documents())
def test_every_key_of_any_document_has_a_line(text: str) -> None:
    """Property: the position index knows exactly the paths of tomllib, and each key's line shows that key."""
    import tomllib

    data = tomllib.loads(text)
    positions = positions_of(text)
    assert set(every_path(data)) == set(positions.lines)
    lines = text.split("\n")
    for path, line in positions.lines.items():
        if len(path) == 1:
            assert written(str(path[0])) in lines[line - 1]


@settings(deadline=None, max_examples=150)
@given(text=documents(), cut=st.floats(0.0, 1.0))
def test_a_text_cut_short_does_not_raise(text: str, cut: float) -> None:
    positions = positions_of(text[: int(cut * len(text))])
    assert all(line >= 1 for line in positions.lines.values())
