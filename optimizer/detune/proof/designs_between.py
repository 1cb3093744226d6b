"""Every nominally feasible design between two costs, by the bounded search: what a selection over scatter goes through.

Meeting the brief at nominal values is necessary for meeting it over the scatter, so the nominal search is a valid
relaxation; with a rising cap these designs come in order of cost, and the first proven one is the cheapest.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from detune.proof.exact_test import Accept
from detune.proof.loewner import Flags
from detune.proof.search import SearchResult, SearchSettings
from detune.proof.search_archive import FoundDesign
from detune.proof.search_front import search_front
from detune.proof.search_tables import design_cost
from detune.proof.selection_data import Floats, Integers, Selection


def designs_between(
    selection: Selection, test: Accept, settings: SearchSettings, cap: float, done_to: float
) -> tuple[list[FoundDesign], SearchResult]:
    """All nominally feasible designs of cost in (done_to, cap], in order of cost; every one, not only a front."""
    kept: list[FoundDesign] = []

    def collecting(designs: Integers) -> tuple[Flags, Floats]:
        feasible, value = test(designs)
        cost = design_cost(selection, designs)
        wanted = feasible & (cost > done_to) & (cost <= cap)
        for row, price, worth in zip(
            designs[wanted].tolist(), cost[wanted].tolist(), value[wanted].tolist(), strict=True
        ):
            kept.append(FoundDesign(tuple(row[:-1]), row[-1], price, worth))
        # Nothing is offered to the archive: an incumbent would cut off designs that are still wanted.
        return np.zeros(len(designs), dtype=bool), value

    result = search_front(selection, collecting, replace(settings, cost_cap=cap))
    kept.sort(key=lambda design: (design.cost, -design.value, design.parts, design.ballast))
    return kept, result
