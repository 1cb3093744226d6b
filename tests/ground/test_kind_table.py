"""A table of kinds reads a kind's file when it is asked for, and not before."""

import sys

import pytest

from detune.brief import allowable, forcing
from detune.ground.kind_table import KindTable
from detune.parts import kinds


def test_a_kind_is_read_when_it_is_asked_for(monkeypatch: pytest.MonkeyPatch) -> None:
    # A module of the standard library that nothing here imports.
    monkeypatch.delitem(sys.modules, "wsgiref.headers", raising=False)
    table: KindTable[object] = KindTable("wsgiref", {"head": "headers.Headers", "whole": "headers"})
    assert "head" in table and "tail" not in table
    assert list(table) == ["head", "whole"] and len(table) == 2
    assert "wsgiref.headers" not in sys.modules
    assert table["head"] is sys.modules["wsgiref.headers"].Headers  # type: ignore[attr-defined]
    assert table["whole"] is sys.modules["wsgiref.headers"]
    assert table.get("tail") is None
    with pytest.raises(KeyError):
        table["tail"]


@pytest.mark.parametrize("table", [forcing.KINDS, allowable.KINDS, kinds.KINDS])
def test_every_line_of_every_table_names_what_it_says(table: KindTable[object]) -> None:
    for kind, found in table.items():
        stated = getattr(found, "model_fields", {}).get("kind")
        assert stated is None or stated.default == kind
