"""The requirement on speeds not to dwell at: the smallest union of bands for each design of a batch."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import Allowable, HarmonicAllowable
from detune.brief.allowable.dwell_bands import DwellBands
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.views import Places
from detune.brief.brief import Brief, applies
from detune.brief.condition import Interval
from detune.brief.dwell import chosen_in, joined, left_of
from detune.brief.finding import Finding, faults_without_lines
from detune.ground.errors import BriefError
from detune.physics.separation import least_separation
from detune.problem.requirement import Requirement
from detune.response.amplitude import works_by_amplitude
from detune.response.assemble import dynamic_matrices
from detune.response.condition_rows import condition_rows
from detune.response.designs import Designs
from detune.response.dwell import exceeding_bands
from detune.response.evaluate import Rows
from detune.response.margin import upper_margin
from detune.response.model import Model
from detune.response.modes import mode_batch

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class DwellMachine:
    """The machine in the condition's state and one reading of unknown damping, with the limits it is held to."""

    model: Model
    rows: Rows


@dataclass(frozen=True)
class DwellRequirements:
    """The limit on the barred width of one shaft in one condition, over all readings of unknown damping together.

    low, high (Hz): the shaft's range; `orders` of it that are excited; `separation`: the limit that is kept
    as well.
    """

    allowable: DwellBands
    requirement: Requirement
    machines: tuple[DwellMachine, ...]
    low: float
    high: float
    orders: tuple[float, ...]
    separation: Separation | None

    def bands(self, design: Designs) -> tuple[Interval, ...] | None:
        """Return the bands (Hz) to bar for one design (D = 1), None where no speed is left in any case."""
        found: list[Interval] = []
        for machine in self.machines:
            more = exceeding_bands(machine.model, design, machine.rows, self.allowable.shaft, self.separation)
            if more is None:
                return None
            found += more
        return joined(found, self.allowable.bands)

    def margins(self, designs: Designs) -> Floats:
        """Return the margin (1, D) of the total width against the allowance."""
        width = np.zeros(designs.count)
        for index in range(designs.count):
            bands = self.bands(designs.take(np.array([index])))
            width[index] = np.inf if bands is None else sum(high - low for low, high in bands)
        return upper_margin(width, np.array(self.allowable.allowance(self.low, self.high)))[None]

    def separations(self, designs: Designs, exempt: float | None) -> Floats:
        """Return the least separation (D,) from the orders of the shaft over the speeds that are left."""
        least = np.full(designs.count, np.inf)
        for index in range(designs.count):
            design = designs.take(np.array([index]))
            bands = self.bands(design)
            left = left_of(self.low, self.high, bands or ())
            intervals = [(order * a, order * b) for a, b in left for order in self.orders]
            for machine in self.machines:
                modal = mode_batch(dynamic_matrices(machine.model, design))
                with np.errstate(divide="ignore"):
                    counts = exempt is None or 1.0 / modal.loss_factor[0] >= exempt
                frequency = modal.frequency[0][np.broadcast_to(counts, modal.frequency[0].shape)]
                least[index] = min(least[index], float(least_separation(frequency, np.array(intervals))))
        return least


def dwell_requirements(
    brief: Brief, machines: tuple[tuple[str | None, Model, Places], ...], allowables: tuple[Allowable, ...]
) -> tuple[DwellRequirements, ...]:
    """Return one requirement for each condition whose speeds not to dwell at are found for each design.

    machines: state, model and places of every state and reading. Raises BriefError for parts that follow the
    amplitude, whose response at one speed depends on where the machine came from.
    """
    found = []
    separation = next((a for a in allowables if isinstance(a, Separation)), None)
    for condition in brief.conditions:
        chosen = chosen_in(brief, condition)
        if chosen is None:
            continue
        limited = [
            a
            for a in allowables
            if isinstance(a, HarmonicAllowable) and applies(a.conditions, condition.name)
        ]
        here = [each for each in machines if each[0] == condition.state]
        if any(works_by_amplitude(model) for _, model, _ in here):
            expected = "parts whose stiffness does not follow the amplitude, beside dwell-bands"
            finding = Finding(("allowable",), f"dwell-bands in {condition.name}", expected)
            raise BriefError(faults_without_lines(brief.file, (finding,)))
        rows = tuple(
            DwellMachine(
                model,
                condition_rows(
                    brief, model, condition, tuple((a, place) for a in limited for place in a.places(places))
                ),
            )
            for _, model, places in here
        )
        family = next(each for each in rows[0].rows.families if each.speed == chosen.shaft)
        requirement = Requirement(chosen, condition.name, chosen.shaft, condition.state)
        orders = family.orders
        found.append(
            DwellRequirements(chosen, requirement, rows, family.low, family.high, orders, separation)
        )
    return tuple(found)
