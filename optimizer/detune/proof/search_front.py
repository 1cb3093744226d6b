"""The two questions asked of the bounded search: the least cost, and the whole front of cost against value."""

from __future__ import annotations

from detune.proof.exact_test import Accept, exact_accept
from detune.proof.search import SearchResult, SearchSettings, search
from detune.proof.selection_data import Selection


def search_least_cost(
    selection: Selection, accept: Accept | None = None, settings: SearchSettings | None = None
) -> SearchResult:
    """The feasible design of least cost, of equal cost the one of greatest value, with the proof's counts.

    accept: final test of designs (D, G+1), by default the rows of the selection themselves. An empty result
    with status "complete" means that none exists; with another status it means that none was found.
    """
    settings = settings or SearchSettings()
    return search(selection, accept or exact_accept(selection, settings.value), settings, "least_cost")


def search_front(
    selection: Selection, accept: Accept | None = None, settings: SearchSettings | None = None
) -> SearchResult:
    """All nondominated pairs of cost (least) and value (greatest), each with one design, in order of cost.

    A subtree whose cheapest completion costs c is searched only for values above the best found at cost <= c, so
    everything discarded is infeasible or dominated and the archive ends as the exact front. When the search
    stops early the front is exact for costs below `lower_bound`.
    """
    settings = settings or SearchSettings()
    return search(selection, accept or exact_accept(selection, settings.value), settings, "front")
