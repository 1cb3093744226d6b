"""The floors of the house: imports go down only, siblings ignore each other, kinds ignore each other.

Source: DESIGN section 7. Every import statement counts, wherever in a file it stands.
"""

from __future__ import annotations

import ast
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1] / "optimizer" / "detune"
FLOORS = {
    "ground": 0,
    "physics": 1,
    "brief": 2,
    "parts": 2,
    "response": 3,
    "problem": 4,
    "proof": 4,
    "sizing": 4,
    "solvers": 5,
    "study": 6,
    "report": 7,
    "cli": 8,
    "__main__": 9,
    "__init__": 9,
}
FILES = sorted(ROOT.rglob("*.py"))
# What may be loaded with the lower floors, so that checking a study file stays quick.
LIGHT = {"numpy", "pydantic", "pydantic_core", "pint"}


def imported(path: Path) -> Iterator[tuple[str, ast.stmt]]:
    """Every module a file imports, by full name, and the statement."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield alias.name, node
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: relative import"
            assert node.module is not None
            yield node.module, node
            # `from detune.brief import forcing` brings in a module as well.
            if node.module.startswith("detune"):
                for alias in node.names:
                    yield f"{node.module}.{alias.name}", node


def at_load(path: Path) -> Iterator[str]:
    """The first word of every module that loading the file loads, functions and type checking left out."""

    def walk(body: list[ast.stmt]) -> Iterator[str]:
        for node in body:
            if isinstance(node, ast.Import):
                yield from (alias.name.split(".")[0] for alias in node.names)
            elif isinstance(node, ast.ImportFrom) and node.module is not None:
                yield node.module.split(".")[0]
            elif isinstance(node, ast.If) and "TYPE_CHECKING" not in ast.unparse(node.test):
                yield from walk([*node.body, *node.orelse])
            elif isinstance(node, ast.Try):
                yield from walk([*node.body, *node.orelse, *node.finalbody])
            elif isinstance(node, ast.ClassDef):
                yield from walk(node.body)

    return walk(ast.parse(path.read_text(encoding="utf-8")).body)


def folder(path: Path) -> str:
    return path.relative_to(ROOT).parts[0].removesuffix(".py")


def name(path: Path) -> str:
    return str(path.relative_to(ROOT))


def test_every_folder_has_its_floor() -> None:
    assert {folder(path) for path in FILES} <= set(FLOORS)


@pytest.mark.parametrize("path", FILES, ids=name)
def test_imports_go_down_only_and_siblings_ignore_each_other(path: Path) -> None:
    own = folder(path)
    for module, node in imported(path):
        parts = module.split(".")
        if parts[0] != "detune" or len(parts) < 2 or parts[1] not in FLOORS:
            continue
        other = parts[1]
        if other != own:
            assert FLOORS[other] < FLOORS[own], f"line {node.lineno}: {own} imports {module}"


KINDS = {f"brief/{kind}": ROOT / "brief" / kind for kind in ("forcing", "allowable")}


def kind_modules(where: Path) -> set[str]:
    """The modules of a folder that hold a kind: those that its `KINDS` table names, as "file.Name"."""
    tree = ast.parse((where / "__init__.py").read_text(encoding="utf-8"))
    for node in tree.body:
        if (
            isinstance(node, ast.AnnAssign)
            and isinstance(node.target, ast.Name)
            and node.target.id == "KINDS"
        ):
            tables = [n for n in ast.walk(node) if isinstance(n, ast.Dict)]
            values = [v.value for table in tables for v in table.values if isinstance(v, ast.Constant)]
            return {str(value).partition(".")[0] for value in values}
    raise AssertionError(f"{where} has no KINDS")


@pytest.mark.parametrize("where", KINDS.values(), ids=KINDS)
def test_no_kind_imports_another_kind(where: Path) -> None:
    """One kind a file: what two of them share stands in a module of its own that is no kind."""
    kinds = kind_modules(where)
    assert len(kinds) >= 1
    package = ".".join(("detune", *where.relative_to(ROOT).parts))
    for kind in kinds:
        for module, node in imported(where / f"{kind}.py"):
            others = {f"{package}.{other}" for other in kinds - {kind}}
            assert module not in others, f"{kind}.py line {node.lineno} imports the kind {module}"
            assert module != package, f"{kind}.py line {node.lineno} imports the table of kinds"


@pytest.mark.parametrize("where", KINDS.values(), ids=KINDS)
def test_a_kind_is_one_line_in_its_table_and_one_file(where: Path) -> None:
    """Every kind module is named in the table once, and no class of a kind hides in a helper."""
    for path in sorted(where.glob("*.py")):
        if path.stem == "__init__":
            continue
        stated = [
            node
            for node in ast.walk(ast.parse(path.read_text(encoding="utf-8")))
            if isinstance(node, ast.AnnAssign)
            and isinstance(node.target, ast.Name)
            and node.target.id == "kind"
            and node.value is not None
        ]
        if stated and path.stem in kind_modules(where):
            assert len(stated) == 1, f"{path.name} holds {len(stated)} kinds"


LOWER = [path for path in FILES if FLOORS[folder(path)] <= 2]


@pytest.mark.parametrize("path", LOWER, ids=name)
def test_lower_floors_load_little(path: Path) -> None:
    """ground, physics, brief and parts load the standard library, numpy, pydantic and pint alone."""
    for module in at_load(path):
        assert module in sys.stdlib_module_names | LIGHT | {"detune"}, f"{name(path)} loads {module}"


@pytest.mark.parametrize("path", [p for p in FILES if folder(p) == "physics"], ids=name)
def test_physics_knows_floats_and_arrays_only(path: Path) -> None:
    """No brief, no part, no unit text: physics may take its kinds of error from the ground, nothing else."""
    for module, node in imported(path):
        if module.startswith("detune."):
            assert module.split(".")[1] in ("physics", "ground"), f"line {node.lineno}: {module}"
        assert not module.startswith(("pydantic", "pint")), f"line {node.lineno}: {module}"


def test_no_file_is_too_long_to_read() -> None:
    """One subject a file, under 400 lines."""
    long = {name(path): len(path.read_text(encoding="utf-8").splitlines()) for path in FILES}
    assert sorted(n for n, lines in long.items() if lines > 400) == []


# Functions over sixty lines, so that the list can only shrink.
LONG_FUNCTIONS = {("sizing/slice_envelope.py", "collect")}


def test_no_function_is_too_long_to_read() -> None:
    """One thought a function, at most 60 lines with its head and its docstring."""
    long = set()
    for path in FILES:
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if isinstance(node, ast.FunctionDef) and (node.end_lineno or 0) - node.lineno >= 60:
                long.add((path.relative_to(ROOT).as_posix(), node.name))
    assert long <= LONG_FUNCTIONS
