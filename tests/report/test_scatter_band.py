"""The scatter in the response plot, as numbers: the sampled ribbon and the guaranteed level, against the
press by hand."""

import numpy as np
import pytest

from detune.report.figures import draw_one
from detune.report.plots import response
from report import press

SCATTER = '\n[scatter]\njudge = "interval"\nstiffness = { lot = "10 %" }\ndamping = { lot = "20 %" }\n'


@pytest.fixture(scope="module")
def scattered(variant):
    return variant(more=SCATTER)


def test_without_scatter_there_is_no_ribbon(result):
    data = response.data(result)
    assert data.scatter == "" and data.points == 0 and "ribbon" not in response.caption(data)
    assert all(p.band_low is None and p.band_high is None and p.guaranteed is None for p in data.panels)


def test_the_ribbon_is_the_range_over_the_corners(scattered):
    """Above resonance the velocity of one mass rises with stiffness: 1.1 k is worst at 30 Hz, 0.9 k is best."""
    data = response.data(scattered)
    assert data.scatter == "stiffness +-10 % by lot, damping +-20 % by lot" and data.points >= 5
    panel = next(p for p in data.panels if p.title.startswith("velocity"))
    part = scattered.subject.design.parts[0]
    k, eta = press.STIFFNESS[part], press.LOSS[part]
    at = int(np.flatnonzero(panel.speed == 30.0)[0])
    corners = [1e3 * press.velocity(30.0, s * k, t * eta) for s in (0.9, 1.1) for t in (0.8, 1.2)]
    assert panel.band_high[at] == pytest.approx(max(corners), rel=1e-9)
    assert panel.band_low[at] == pytest.approx(min(corners), rel=1e-3)
    assert (panel.band_low <= panel.value).all() and (panel.value <= panel.band_high).all()
    inside = (panel.speed >= panel.low) & (panel.speed <= panel.high)
    assert panel.band_high[inside].max() <= panel.guaranteed <= panel.limit
    assert "sampled at" in response.caption(data) and "not proven" in response.caption(data)


def test_it_is_drawn(scattered, result):
    """The ribbon and the level are two more shapes in every panel that has them."""
    with_scatter = draw_one("response", response, response.data(scattered)).svg
    without = draw_one("response", response, response.data(result)).svg
    assert with_scatter.count("PolyCollection") > without.count("PolyCollection")
