"""How a power spectral density is stated: break points, slopes between corners, or a CSV file."""

from collections.abc import Mapping, Sequence
from itertools import pairwise

from pydantic import ValidationInfo

from detune.brief.data_file import DataFileFault, read_named
from detune.brief.statement import refuse
from detune.physics.spectra import PowerSpectralDensity, differentiated, spectrum_from_slopes

BreakPoints = Sequence[tuple[float, float]]


def drawn_density(points: BreakPoints, at: str) -> PowerSpectralDensity:
    """Return the density through break points (Hz, unit^2/Hz), straight on log-log axes; else refuse them."""
    try:
        return PowerSpectralDensity([f for f, _ in points], [s for _, s in points])  # type: ignore[arg-type]
    except ValueError as error:
        raise refuse([list(point) for point in points], _sentence(error), at=at) from None


def sloped_density(
    corners: Sequence[float] | None, slopes: Sequence[float] | None, level: tuple[float, float] | None
) -> PowerSpectralDensity:
    """Return the density from corners (Hz), slopes between them (dB/octave) and the level at one corner."""
    if corners is None or slopes is None or level is None:
        raise refuse("an incomplete spectrum", '"corners", "slopes" and "level" together')
    for before, after in pairwise(corners):
        if not 0.0 < before < after:
            raise refuse(list(corners), "corner frequencies above zero that rise", at="corners")
    if len(slopes) != len(corners) - 1:
        expected = f"one slope between each two of the {len(corners)} corners"
        raise refuse(list(slopes), expected, at="slopes")
    if level[1] <= 0.0:
        raise refuse(list(level), "a density above zero", at="level")
    try:
        return spectrum_from_slopes(corners, slopes, level[1], level[0])
    except ValueError as error:
        raise refuse(list(level), _sentence(error), at="level") from None


def tabulated_density(info: ValidationInfo, file: str, kinds: Mapping[str, int]) -> PowerSpectralDensity:
    """Return the density of a CSV file with a column `frequency` and one named as its kind of unit.

    kinds: kind of unit -> how often the quantity is differentiated to become the one that acts.
    """
    table = read_named(info, file, {"frequency": "frequency"}, {name: name for name in kinds})
    name = next(name for name in kinds if name in table.columns)
    points = list(zip(table.columns["frequency"].tolist(), table.columns[name].tolist(), strict=True))
    try:
        table.refuse_rows(table.columns["frequency"] <= 0.0, "frequency", "a frequency above zero")
        table.refuse_rows(table.columns[name] < 0.0, name, "a density of zero or more")
        for row in range(1, len(points)):
            if points[row][0] < points[row - 1][0]:
                wrong = table.line == table.line[row]
                table.refuse_rows(wrong, "frequency", "a frequency that does not fall from row to row")
        drawn = PowerSpectralDensity(table.columns["frequency"], table.columns[name])
    except DataFileFault as fault:
        raise refuse(file, str(fault), at="file") from None
    except ValueError as error:
        raise refuse(file, f"{_sentence(error)} (rows below the headers of {file})", at="file") from None
    return differentiated(drawn, kinds[name])


def one_way(stated: Mapping[str, bool]) -> str:
    """Return the one key that is stated, else refuse."""
    found = [key for key, given in stated.items() if given]
    if len(found) != 1:
        listed = ", ".join(f'"{key}"' for key in stated)
        raise refuse(" and ".join(found) or "no spectrum", f"exactly one of {listed}")
    return found[0]


def _sentence(error: ValueError) -> str:
    told = str(error).removeprefix("power spectral density: ")
    return f"a spectrum that can be drawn on log-log paper: {told}"
