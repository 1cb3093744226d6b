"""All loads of a condition put on the rows that are judged under them."""

from detune.brief.allowable.base import HarmonicAllowable
from detune.brief.brief import Brief, applies
from detune.brief.condition import Condition
from detune.response.evaluate import Rows
from detune.response.loads import Family, condition_families
from detune.response.model import Model
from detune.response.random import noise_load
from detune.response.swept import Passage
from detune.response.transient import transient_load


def condition_rows(
    brief: Brief, model: Model, condition: Condition, pairs: tuple[tuple[HarmonicAllowable, str], ...]
) -> Rows:
    """Return the rows of a condition under its own forcing: tones, noise, records and passages."""
    acting = [forcing for forcing in brief.forcing if applies(forcing.conditions, condition.name)]
    families = condition_families(brief, model, condition)
    passed = (*condition.run_up, *condition.coast_down)
    return Rows(
        pairs=pairs,
        families=tuple(family for family in families if family.speed not in passed),
        noises=tuple(noise_load(brief, model, noise) for forcing in acting for noise in forcing.noises()),
        transients=tuple(
            transient_load(brief, model, each) for forcing in acting for each in forcing.transients()
        ),
        passages=tuple(_ways(family, condition) for family in families if family.speed in passed),
    )


def _ways(family: Family, condition: Condition) -> tuple[Passage, ...]:
    ways = []
    if family.speed in condition.run_up:
        ways.append(Passage(family, condition.run_up[family.speed], family.low, family.high))
    if family.speed in condition.coast_down:
        ways.append(Passage(family, condition.coast_down[family.speed], family.high, family.low))
    return tuple(ways)
