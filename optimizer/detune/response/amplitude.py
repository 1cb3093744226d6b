"""Responses of designs with parts whose stiffness depends on amplitude, at the amplitude they themselves produce.

Every station works at the peak of its own axial dynamic deflection under all that acts in the condition. At each
speed of a tone that is the deflection at that speed; what else acts beside it (tones of other speeds, noise,
records, passages) adds its own largest deflection. It is found by iteration from several amplitudes, at each speed
from none and one a decade of the tables, for all sources together from none and the greatest: where they come to
different ends, the largest response counts.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import HarmonicAllowable
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.physics import envelope
from detune.physics.fixed_point import fixed_points
from detune.response.assemble import Dynamic, at_amplitude
from detune.response.coincidence import meeting
from detune.response.designs import Designs
from detune.response.evaluate import TWO_PI, Amplitudes, Rows, combined, family_amplitude, response_values
from detune.response.loads import Family
from detune.response.model import Model
from detune.response.modes import mode_batch, sharp_poles

Floats = NDArray[np.float64]
Integers = NDArray[np.intp]
Booleans = NDArray[np.bool_]
# Amplitudes at which modes are looked for, so that the search over speed knows where peaks may be.
LOOKS = 7
BACKGROUND = 64
# What several sources together are iterated to: a supremum over speed is known to about as much.
MOST_ROUNDS = 60
CLOSE = 2e-5
# Relative difference from which two ends are two answers.
APART = 1e-3
AXIAL = MountDeflection(part="dynamic", direction="axial", limit=1.0)


@dataclass(frozen=True, eq=False)
class Working:
    """What each of J sources deflects the stations by, (J, S, D) in m, and which designs (D,) were settled."""

    sources: tuple[Rows, ...]
    deflection: Floats
    settled: Booleans

    @property
    def total(self) -> Floats:
        """Amplitude (S, D) at which the parts work."""
        amplitude: Floats = self.deflection.sum(axis=0)
        return amplitude

    def beside(self, source: int) -> Floats:
        """Amplitude (S, D) of everything but one source."""
        return np.asarray(np.maximum(self.total - self.deflection[source], 0.0))


def works_by_amplitude(model: Model) -> bool:
    """Return whether some part's stiffness depends on amplitude."""
    return any(group.laws is not None and group.laws.with_amplitude for group in model.groups)


def deflection_pairs(model: Model) -> tuple[tuple[HarmonicAllowable, str], ...]:
    """Return the rows whose values are the axial deflections of all stations that carry."""
    return tuple((AXIAL, station.name) for station in model.stations if station.parallel > 0)


def values_at_own_amplitude(
    model: Model, designs: Designs, dynamic: Dynamic, rows: Rows, driving: Rows
) -> Amplitudes:
    """Return each row's value with all parts at the amplitude that `driving`, the condition's own forcing, gives.

    Rows under a unit load take the worse of that amplitude and none. Infinite where no amplitude was found that
    reproduces itself.
    """
    ends = working_amplitudes(model, designs, dynamic, driving)
    settled = np.all([end.settled for end in ends], axis=0)
    value = np.zeros((len(rows.pairs), designs.count))
    frequency = np.full_like(value, np.nan)
    if rows.largest:
        for amplitude in (np.zeros_like(ends[0].total), *(end.total for end in ends)):
            at = at_amplitude(dynamic, amplitude)
            part = response_values(model, designs, at, mode_batch(at), rows)
            settled &= ~at.topples
            frequency = np.where(part.value > value, part.frequency, frequency)
            value = np.maximum(value, part.value)
    else:
        for end in ends:
            part, found = _together(model, designs, dynamic, rows, end)
            settled &= found
            frequency = np.where(part.value > value, part.frequency, frequency)
            value = np.maximum(value, part.value)
    return Amplitudes(np.where(settled, value, np.inf), frequency)


def _together(
    model: Model, designs: Designs, dynamic: Dynamic, rows: Rows, working: Working
) -> tuple[Amplitudes, Booleans]:
    """Return the rows' values under all sources at one end, and the designs for which every speed was settled."""
    settled = np.ones(designs.count, dtype=bool)
    value = np.zeros((len(rows.pairs), designs.count))
    frequency, largest = np.full_like(value, np.nan), np.full_like(value, -np.inf)
    tones = [source.families[0] for source in working.sources if source.families]
    # What has no family of its own meets nothing; families come first among the sources.
    linked = (*meeting(tones), *range(len(tones), len(working.sources)))
    together: dict[int, Floats] = {}
    for number, source in enumerate(working.sources):
        judged = replace(source, pairs=rows.pairs)
        part, found = _source_values(model, designs, dynamic, judged, working, number)
        settled &= found
        together[linked[number]] = together.get(linked[number], 0.0) + part.value
        bigger = np.isfinite(part.frequency) & (part.value > largest)
        frequency = np.where(bigger, part.frequency, frequency)
        largest = np.where(bigger, part.value, largest)
    for each in together.values():
        value = combined(rows, value, each)
    return Amplitudes(value, frequency), settled


def working_amplitudes(
    model: Model, designs: Designs, dynamic: Dynamic, driving: Rows
) -> tuple[Working, ...]:
    """Return the amplitudes at which the parts of D designs work under the forcing of a condition.

    More than one where some design comes to another end from large amplitudes than from none.
    """
    watched = replace(driving, pairs=deflection_pairs(model))
    sources = _sources(watched)
    shape = (len(sources), len(model.stations), designs.count)
    settled = np.ones(designs.count, dtype=bool)
    numbers = [model.station_names.index(name) for _, name in watched.pairs]

    def step(columns: Floats, index: Integers) -> Floats:
        chosen, matrices = designs.take(index), dynamic.take(index)
        here = Working(sources, columns.reshape(*shape[:2], len(index)), np.ones(len(index), dtype=bool))
        there = np.zeros_like(here.deflection)
        together = np.ones(len(index), dtype=bool)
        for number, source in enumerate(sources):
            part, found = _source_values(model, chosen, matrices, source, here, number)
            there[number, numbers] = part.value
            together &= found
        # What counts is the last look at each design: on the way a part may be softer than it ends.
        settled[index] = together
        return there.reshape(columns.shape)

    start = np.zeros((shape[0] * shape[1], shape[2]))
    if len(sources) == 1 and sources[0].families:
        # One speed alone finds its own amplitude within.
        return (Working(sources, step(start, np.arange(designs.count)).reshape(shape), settled),)
    ends: list[Working] = []
    for level in (0.0, _amplitude_range(model)[1]):
        found = fixed_points(step, start + level, MOST_ROUNDS, CLOSE)
        end = Working(sources, found.value.reshape(shape), settled & found.settled)
        if not ends or not _one_answer(ends[0], end):
            ends.append(end)
    return tuple(ends)


def _one_answer(first: Working, second: Working) -> bool:
    """Return whether two ends are the same for every design."""
    size = np.maximum(first.total.max(axis=0), second.total.max(axis=0))
    apart = np.abs(first.total - second.total).max(axis=0) > APART * size
    return not np.any(apart | (first.settled != second.settled))


def _sources(rows: Rows) -> tuple[Rows, ...]:
    """Return the rows once for each thing that acts independently: a speed, the noises, the records, a passage."""
    bare = replace(rows, families=(), noises=(), transients=(), passages=())
    sources = [replace(bare, families=(family,)) for family in rows.families]
    sources += [replace(bare, noises=rows.noises)] if rows.noises else []
    sources += [replace(bare, transients=rows.transients)] if rows.transients else []
    return (*sources, *(replace(bare, passages=(passage,)) for passage in rows.passages))


def _source_values(
    model: Model, designs: Designs, dynamic: Dynamic, source: Rows, working: Working, number: int
) -> tuple[Amplitudes, Booleans]:
    """Return the values of a source's rows, and the designs for which an amplitude was found at every speed."""
    if source.families:
        return _over_speed(model, designs, dynamic, source, working.beside(number))
    at = at_amplitude(dynamic, working.total)
    return response_values(model, designs, at, mode_batch(at), source), ~at.topples


def _over_speed(
    model: Model, designs: Designs, dynamic: Dynamic, rows: Rows, beside: Floats
) -> tuple[Amplitudes, Booleans]:
    """Return the suprema over the speeds of the only family of `rows`, each speed at its own amplitude."""
    (family,) = rows.families
    settled = np.ones(designs.count, dtype=bool)
    centres, widths = _peaks(model, dynamic, family)

    def amplitude(speed: Floats) -> Floats:
        count = speed.shape[1]
        design = np.repeat(np.arange(designs.count), count)
        values = points(design, speed.ravel())
        return values.reshape(len(rows.pairs), designs.count, count)

    def points(design: NDArray[np.int64], speed: Floats) -> Floats:
        chosen, matrices = designs.take(design), dynamic.take(design)
        values, found = _at_speeds(model, chosen, matrices, rows, speed[:, None], beside[:, design])
        settled[design[~found]] = False
        return values

    low, high = TWO_PI * family.low, TWO_PI * family.high
    found = envelope.supremum(amplitude, low, high, centres, widths, points=points, background=BACKGROUND)
    return Amplitudes(found.value, found.omega / TWO_PI), settled


def _at_speeds(
    model: Model, designs: Designs, dynamic: Dynamic, rows: Rows, speed: Floats, beside: Floats
) -> tuple[Floats, Booleans]:
    """Return the rows' values (R, D), each design at one speed (D, 1), and where an amplitude was found (D,)."""
    (family,) = rows.families
    watched = replace(rows, pairs=deflection_pairs(model))
    numbers = [model.station_names.index(name) for _, name in watched.pairs]

    def step(amplitude: Floats, index: Integers) -> Floats:
        at = at_amplitude(dynamic.take(index), amplitude)
        total = beside[:, index].copy()
        total[numbers] += family_amplitude(model, designs.take(index), at, watched, family, speed[index])[
            ..., 0
        ]
        return total

    values, found = np.zeros((len(rows.pairs), designs.count)), np.ones(designs.count, dtype=bool)
    for level in _levels(*_amplitude_range(model)):
        start = beside + level
        ends = fixed_points(step, start)
        at = at_amplitude(dynamic, ends.value)
        values = np.maximum(values, family_amplitude(model, designs, at, rows, family, speed)[..., 0])
        found &= ends.settled & ~at.topples
    return values, found


def _levels(least: float, greatest: float) -> Floats:
    """Return the amplitudes (m) to start from: none, and from the greatest down one a decade."""
    decades = int(np.floor(np.log10(greatest / least))) + 1
    return np.concatenate([[0.0], greatest * 10.0 ** -np.arange(decades)])


def _peaks(model: Model, dynamic: Dynamic, family: Family) -> tuple[Floats, Floats]:
    """Return where modes lie over speed, and their half widths, (D, m) in rad/s, at amplitudes over the tables."""
    stations, count = len(model.stations), dynamic.mass.shape[0]
    looks = []
    for amplitude in np.geomspace(*_amplitude_range(model), LOOKS):
        there = at_amplitude(dynamic, np.full((stations, count), amplitude))
        looks.append(envelope.centres_of_poles(sharp_poles(there, mode_batch(there)), family.orders))
    return np.concatenate([c for c, _ in looks], axis=1), np.concatenate([w for _, w in looks], axis=1)


def _amplitude_range(model: Model) -> tuple[float, float]:
    """Return the least and the greatest amplitude (m) in any table."""
    tables = [
        t for group in model.groups if group.laws is not None for t in group.laws.amplitudes if t is not None
    ]
    return min(t.amplitude[0] for t in tables), max(t.amplitude[-1] for t in tables)


def worse_of_two_amplitudes(
    model: Model, designs: Designs, dynamic: Dynamic, driving: Rows, values: Callable[[Dynamic], Floats]
) -> Floats:
    """Return the larger of values (R, D) at no amplitude and at that of the forcing; infinite if none is found."""
    ends = working_amplitudes(model, designs, dynamic, driving)
    amplitudes = (np.zeros_like(ends[0].total), *(end.total for end in ends))
    found = np.max([values(at_amplitude(dynamic, amplitude)) for amplitude in amplitudes], axis=0)
    return np.where(np.all([end.settled for end in ends], axis=0), found, np.inf)
