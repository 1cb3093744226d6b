"""The pages against the code: generated tables, names of modules and tests, words, links."""

from __future__ import annotations

import ast
import importlib.util
import re
import sys
import tomllib
from pathlib import Path
from types import ModuleType

import pytest

from detune.brief import forcing
from detune.brief.choice import Choice
from detune.brief.condition import Condition
from detune.brief.read import BY_KIND, REPEATED, SINGLE
from detune.parts.catalog import read_catalog
from detune.parts.kinds import KINDS
from detune.parts.prices import price_each

TOP = Path(__file__).parents[2]
DOCS = TOP / "docs"
PAGES = sorted(DOCS.glob("*.md"))


def text_of(page: str) -> str:
    return (DOCS / page).read_text(encoding="utf-8")


@pytest.fixture(scope="module")
def tables() -> ModuleType:
    spec = importlib.util.spec_from_file_location("documentation_tables", DOCS / "tables.py")
    assert spec is not None and spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = module
    spec.loader.exec_module(module)
    return module


@pytest.mark.parametrize("page", ["study-file.md", "catalogs.md"])
def test_generated_tables_are_what_the_code_says(tables: ModuleType, page: str) -> None:
    text = text_of(page)
    assert tables.with_tables(page, text) == text, "write the tables again with: python docs/tables.py"


def test_every_key_of_every_table_and_kind_is_told(tables: ModuleType) -> None:
    """Keys, kinds of unit and defaults, found in the page by their heading and not by the generator."""
    text = text_of("study-file.md")
    every = {f"[{name}]": cls for name, cls in SINGLE.items()}
    every |= {f"[[{name}]]": cls for name, cls in REPEATED.items()}
    every |= {name: cls for kinds in BY_KIND.values() for name, cls in kinds.items()}
    for heading, cls in every.items():
        _, _, rest = text.partition(f"\n### `{heading}`\n")
        own = rest.partition("\n### ")[0]
        assert own, heading
        for key, field in cls.model_fields.items():
            if key == "kind" and not heading.startswith("["):
                continue
            row = next((line for line in own.splitlines() if line.startswith(f"| `{key}` |")), "")
            assert row, (heading, key)
            assert (row.split(" | ")[2] == "required") == field.is_required(), (heading, key)


def test_every_column_of_every_kind_of_part_is_told() -> None:
    text = text_of("catalogs.md")
    for name, kind in KINDS.items():
        own = text.partition(f"\n### {name}\n")[2].partition("\n### ")[0]
        for column in kind.COLUMNS:
            assert f"`{column.header}`" in own, (name, column.name)


def test_modules_named_in_the_pages_exist() -> None:
    """`physics.floor` is a module of the package, `brief.allowable.base.combine` a name in one."""
    floors = "ground|physics|brief|parts|response|problem|proof|sizing|solvers|study|report"
    for page in (DOCS / "equations.md", DOCS / "words.md"):
        for dotted in re.findall(rf"`((?:{floors})(?:\.\w+)+)`", page.read_text(encoding="utf-8")):
            words = dotted.split(".")
            path = TOP / "optimizer" / "detune" / Path(*words)
            inside = path.parent.with_suffix(".py")
            exists = path.with_suffix(".py").is_file() or path.is_dir()
            if not exists and inside.is_file():
                exists = (
                    re.search(rf"^(def|class) {words[-1]}\b", inside.read_text(encoding="utf-8"), re.M)
                    is not None
                )
            assert exists, f"{page.name} names {dotted}"


def test_checks_named_in_the_page_exist() -> None:
    rows = re.findall(r"`(tests/[\w/]+\.py)::(\w+)`", text_of("checks.md"))
    assert len(rows) > 100
    known: dict[str, set[str]] = {}
    for file, name in rows:
        if file not in known:
            tree = ast.parse((TOP / file).read_text(encoding="utf-8"))
            known[file] = {node.name for node in ast.walk(tree) if isinstance(node, ast.FunctionDef)}
        assert name in known[file], f"{file} has no {name}: write the page again with docs/checks.py"


def test_links_between_pages_lead_somewhere() -> None:
    for page in [*PAGES, TOP / "README.md", TOP / "DEVELOPERS.md"]:
        for target in re.findall(r"\]\(([\w./-]+\.md)", page.read_text(encoding="utf-8")):
            assert (page.parent / target).is_file(), f"{page.name}: {target}"


def toml_blocks(page: str) -> list[str]:
    return re.findall(
        r"^```(?:toml|\{code-block\} toml\n:caption: [^\n]+)\n+(.*?)^```$",
        text_of(page),
        re.DOTALL | re.MULTILINE,
    )


def test_examples_of_forcing_are_sound() -> None:
    """Every table of the page "which forcing do I need" is read as a study file's would be."""
    blocks = toml_blocks("which-forcing.md")
    assert len(blocks) >= 5
    for block in blocks:
        data = tomllib.loads(block)
        for table in data.pop("condition", []):
            Condition.model_validate(table, context={"from_file": True})
        for table in data.pop("forcing", []):
            made = forcing.KINDS[table["kind"]].model_validate(table, context={"from_file": True})
            assert made.tones({"rotor": (1.0, 2.0), "male rotor": (1.0, 2.0)}) or made.noises()
        assert not data


def test_every_kind_of_forcing_has_its_line_in_the_guide() -> None:
    text = text_of("which-forcing.md")
    missing = [kind for kind in forcing.KINDS if f"`{kind}`" not in text]
    assert not missing


def test_the_lists_of_the_catalog_page(tmp_path: Path) -> None:
    """Both lists of the page are read as it says; plum-17 by hand: 1 lbf/in = 175.1268 N/m, Q = 8."""
    text = text_of("catalogs.md")
    for name, body in re.findall(
        r"^```\{code-block\} text\n:caption: (\S+)\n\n(.*?)^```$", text, re.DOTALL | re.MULTILINE
    ):
        (tmp_path / name).write_text(body, encoding="utf-8")
    own, mapped, choice = (tomllib.loads(block) for block in toml_blocks("catalogs.md"))
    (source,) = own["catalog"]
    mounts = read_catalog(tmp_path / source["file"], source["name"])
    assert [(m.part, m.cost) for m in mounts.parts] == [("rowan-a", 12.5), ("rowan-b", 21.0)]
    assert price_each(mounts.parts[0], 10) == 11.0
    assert price_each(mounts.parts[1], 10) == 21.0
    assert mounts.parts[0].stiffness_dynamic[2] == 125e3
    (source,) = mapped["catalog"]
    headers, units_, constants = source["headers"], source["units"], source["constants"]
    supplier = read_catalog(tmp_path / source["file"], source["name"], "mount", headers, units_, constants)
    plum = supplier.parts[0]
    assert plum.stiffness_static[2] == pytest.approx(17_513, abs=0.5)
    assert plum.stiffness_dynamic[2] == pytest.approx(21_891, abs=0.5)
    assert plum.loss_factor[2] == 1 / 8
    assert plum.pulls
    assert Choice.model_validate(choice["choice"][0], context={"from_file": True}).group == "feet"


# What a brief, the summary, the report and the result folder say.
WORDS = """brief, machine, body, station, group, part, catalog, condition, forcing, allowable, scatter, design, claim,
assessment, margin, separation, front, proof record, excitation interval, lower bound, answer, closest design,
least margin, tightest, assumed, participation, amplification, exempt, resultant, sag, tilt, uplift, stability, ballast,
objective, transient, noise, tone, passage, withdrawn, second opinion, bounded search, enumeration, shim,
installed height, caution, state, supremum, transmissibility, travel, settling time"""


def test_words_have_their_line() -> None:
    heads = [
        head for head in re.findall(r"^\| ([^|]+) \| ", text_of("words.md"), re.MULTILINE) if head != "word"
    ]
    assert len(heads) == len(set(heads)), "one word for one thing"
    told = {word.strip() for head in heads for word in head.split(",")}
    missing = {word.strip() for word in WORDS.replace("\n", " ").split(",")} - told
    assert not missing
