"""Assessments that are made once and kept for one run."""

from detune.brief.brief import Brief
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.response.design import Design


class Assessor:
    """Assesses designs of one brief, each of them once: what is known is kept here and goes with this object."""

    def __init__(self, brief: Brief) -> None:
        self._brief = brief
        self._known: dict[Design, Assessment] = {}

    def __call__(self, design: Design) -> Assessment:
        """Return the assessment of a design. Raises UnsupportedMachine where statics have no solution."""
        if design not in self._known:
            self._known[design] = assess(self._brief, design)
        return self._known[design]
