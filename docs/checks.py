"""Writes the list of outside checks from the tests: `python docs/checks.py`.

A test is listed when its name, docstring or comments carry the id of a check, or when they name a book, a standard
or another library.
"""

import ast
import re
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

DOCS = Path(__file__).parent
TESTS = DOCS.parent / "tests"
BEGIN, END = "<!-- begin: checks -->", "<!-- end: checks -->"
SECTIONS = {
    "S": "One degree of freedom, harmonic",
    "W": "Worked examples of textbooks",
    "T": "Tuned absorber",
    "R": "Random",
    "K": "Shock",
    "Q": "Passage through resonance",
    "C": "Criteria and standards",
    "M": "Mount behaviour",
    "X": "Against general-purpose libraries",
    "P": "Theorems",
    "": "Others, each with its source in the test",
}
# The ids of the project's table of checks; anything else that looks like one is a symbol of an equation.
IDS = {
    "S": (1, 3, 4, 5, 6, 7, 9, 11, 12),
    "W": (1, 2, 3, 4, 5, 8, 9, 11, 12, 13, 17, 18, 19, 20, 21),
    "T": (1, 5, 6, 7, 10),
    "R": (1, 2, 3, 4, 5, 6, 10, 13),
    "K": (1, 2, 4, 5, 6),
    "Q": (1, 2),
    "C": (1, 2, 4, 5, 7, 8, 9, 10),
    "M": (4, 5),
    "X": (1, 2, 3, 5, 6, 7, 8),
    "P": (1, 2, 3, 4, 5, 6, 8, 9),
}
NAMED = re.compile(r"_([swtrkqcmxp])(\d{1,2})(?=_|$)")
STATED = re.compile(r"(?<![\w.])([SWTRKQCMXP])(\d{1,2})(?=[:,.(]| \(| with )")
SOURCES = re.compile(
    r"\b(ISO|IEC|ASTM|NIST|NASA|MIL-STD|NAVMAT|AISC|Rao|Den Hartog|Thomson|Inman|Harris|Bevan|Meirovitch|Horn|Higham"
    r"|Crandall|Lindley|Imhof|Davenport|Mindlin|Snowdon|Lewis|Warburton|Goldstein|Clough|Sylvester|Rayleigh|Maxwell"
    r"|scipy|numpy|sympy|mpmath|python-control|pint|lsim|solve_ivp|fsolve|Lyapunov|Parseval|Kronrod"
    r"|closed form|by hand)\b"
)


@dataclass(frozen=True)
class Check:
    """One test: id (empty where it has none), what it checks, what is said of the source, and where it stands."""

    id: str
    what: str
    source: str
    place: str


def checks_of(path: Path) -> Iterator[Check]:
    """Yield the checks of one test file."""
    text = path.read_text(encoding="utf-8")
    lines = text.splitlines()
    for node in ast.parse(text).body:
        if not isinstance(node, ast.FunctionDef) or not node.name.startswith("test_"):
            continue
        first = min([node.lineno, *(mark.lineno for mark in node.decorator_list)])
        while lines[first - 2].startswith("# "):
            first -= 1
        comments = [
            line.strip(" #") for line in lines[first - 1 : node.end_lineno] if line.strip().startswith("# ")
        ]
        said = " ".join([*(ast.get_docstring(node) or "").split(), *comments])
        named = [(letter.upper(), int(number)) for letter, number in NAMED.findall(node.name)]
        named += [(letter, int(number)) for letter, number in STATED.findall(said)]
        ids = [f"{letter}{number}" for letter, number in named if number in IDS[letter]]
        if not ids and not SOURCES.search(said):
            continue
        what = NAMED.sub("", node.name.removeprefix("test")).replace("_", " ").strip()
        place = f"tests/{path.relative_to(TESTS).as_posix()}::{node.name}"
        yield Check(ids[0] if ids else "", what, _cut(said), place)


def _files() -> list[Path]:
    """Return the test files, those of the documentation left out."""
    return sorted(path for path in TESTS.rglob("test_*.py") if "docs" not in path.relative_to(TESTS).parts)


def _cut(text: str, most: int = 170) -> str:
    """Return the text up to the end of a sentence or word, safe inside a table."""
    text = (
        text.replace("|", "\\|").replace("<", "&lt;").replace("*", "\\*").replace("_", "\\_").replace("`", "")
    )
    if len(text) <= most:
        return text
    return text[:most].rsplit(" ", 1)[0] + " ..."


def page_part() -> str:
    """Return the list of all checks as Markdown."""
    found = [check for path in _files() for check in checks_of(path)]
    lines = [f"{len(found)} tests, of which {sum(bool(check.id) for check in found)} carry an id.\n"]
    for letter, title in SECTIONS.items():
        own = [check for check in found if check.id[:1] == letter]
        if not own:
            continue
        own.sort(key=lambda check: (int(check.id[1:] or 0), check.place))
        lines += [
            f"## {title}\n",
            "| id | what | source, as the test states it | test |",
            "|---|---|---|---|",
        ]
        lines += [f"| {c.id} | {c.what} | {c.source} | `{c.place}` |" for c in own]
        lines.append("")
    return "\n".join(lines)


def main() -> None:
    """Write the list into its page."""
    path = DOCS / "checks.md"
    before, _, rest = path.read_text(encoding="utf-8").partition(BEGIN)
    after = rest.partition(END)[2]
    path.write_text(f"{before}{BEGIN}\n\n{page_part()}\n{END}{after}", encoding="utf-8")


if __name__ == "__main__":
    main()
