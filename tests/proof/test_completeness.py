"""No rule of the search removes a design that meets the rows: every such design must reach the final test.

The response limits are taken away and the static windows are narrow, so that a large share of all designs lies near the
static and modal limits where a wrong bound would show.
"""

import types
from dataclasses import replace

import numpy as np
import pytest

from detune.proof import block_response, block_rules, block_search, search_compiled
from detune.proof.exact_test import exact_accept
from detune.proof.instances import InstanceSettings, make_instance
from detune.proof.search import SearchSettings
from detune.proof.search_front import search_front
from detune.proof.selection_data import StaticRows, no_harmonic_cases


def static_instance(parts, groups, seed):
    """An instance without response limits, with a wide tilt limit, widened windows and a small separation."""
    selection = make_instance(
        InstanceSettings(
            parts=parts, groups=groups, seed=seed, ballast_steps=1 + seed % 2, empty=seed % 3 == 0
        )
    )
    bands = replace(selection.bands, separation=np.full(3, 0.01))
    tilt = np.full(2, 6e-3)
    rows = StaticRows(rows=selection.static_rows.rows, lower=-tilt, upper=tilt)
    widened = tuple(
        replace(
            g, load_min=0.5 * g.load_min, load_max=1.2 * g.load_max, deflection_max=1.5 * g.deflection_max
        )
        for g in selection.groups
    )
    stations = len(selection.station_group)
    return replace(
        selection, bands=bands, static_rows=rows, harmonic=no_harmonic_cases(stations, 6), groups=widened
    )


def reached(selection, kernels):
    """All designs that reach the final test, and which of them pass it."""
    test, seen, passed = exact_accept(selection), [], []

    def accept(designs):
        feasible, value = test(designs)
        seen.extend(map(tuple, designs.tolist()))
        passed.extend(map(tuple, designs[feasible].tolist()))
        return np.zeros(len(designs), dtype=bool), value

    result = search_front(selection, accept, SearchSettings(kernels=kernels))
    assert sum(result.counts.values()) == selection.design_count
    assert len(set(seen)) == len(seen)
    return passed


def everything(selection):
    """All designs that pass the rows, by enumeration."""
    sizes = (*selection.sizes, len(selection.ballast.cost))
    designs = np.stack(np.meshgrid(*map(np.arange, sizes), indexing="ij"), axis=-1).reshape(-1, len(sizes))
    feasible, _ = exact_accept(selection)(designs)
    return list(map(tuple, designs[feasible].tolist()))


@pytest.mark.parametrize("groups, parts", [(1, 60), (2, 24), (3, 9), (4, 5)])
@pytest.mark.parametrize("seed", [0, 1])
def test_numpy_rules_lose_nothing(groups, parts, seed):
    selection = static_instance(parts, groups, seed)
    expected = everything(selection)
    assert sorted(reached(selection, "numpy")) == sorted(expected)


def test_the_instances_are_telling():
    """Between them the instances hold hundreds of designs that a wrong rule could lose."""
    assert sum(len(everything(static_instance(9, 3, seed))) for seed in range(1)) > 10
    assert sum(len(everything(static_instance(24, 2, seed))) for seed in range(2)) > 10


@pytest.mark.parametrize("groups, parts, seed", [(2, 12, 1), (3, 6, 1), (4, 4, 1)])
def test_block_rules_lose_nothing(monkeypatch, tmp_path, groups, parts, seed):
    """The text that is compiled, run as plain Python."""
    names = {**vars(block_rules), **vars(block_search), **vars(block_response)}
    plain = types.SimpleNamespace(**{k: v for k, v in names.items() if not k.startswith("__")})
    monkeypatch.setenv("DETUNE_CACHE", str(tmp_path))
    monkeypatch.setattr(search_compiled, "load_kernels", lambda n, announce=None: plain)
    selection = static_instance(parts, groups, seed)
    assert sorted(reached(selection, "compiled")) == sorted(everything(selection))


@pytest.mark.nightly
@pytest.mark.parametrize("groups, parts", [(2, 200), (3, 40), (4, 14), (5, 8)])
@pytest.mark.parametrize("seed", range(6))
def test_compiled_rules_lose_nothing(groups, parts, seed):
    selection = static_instance(parts, groups, seed)
    expected = everything(selection)
    assert sorted(reached(selection, "compiled")) == sorted(expected)
