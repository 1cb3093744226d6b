"""The list of units, held against pint's own reading of the same file."""

import os
import subprocess
import sys
from fractions import Fraction
from pathlib import Path
from typing import Any

import pint
import pytest

import detune.ground
from detune.ground.unit_table import UnitTextError, known_units, measure_of

LIST = Path(detune.ground.__path__[0]) / "units.txt"


@pytest.fixture(scope="module")
def registry() -> Any:
    return pint.UnitRegistry(str(LIST), cache_folder=None, on_redefinition="raise")


def test_every_factor_and_dimension_is_the_one_pint_finds(registry: Any) -> None:
    """pint reads units.txt on its own; factors agree to the last few bits."""
    assert len(known_units()) > 150
    for name, measure in known_units().items():
        if measure.offset:
            continue
        factor, base = registry.get_root_units(name)
        assert float(measure.scale) == pytest.approx(float(factor), rel=1e-14), name
        dimension = {unit: int(power) for unit, power in base._units.items()}
        assert dict(measure.dimension) == dimension, name


@pytest.mark.parametrize("name", ["degC", "degF"])
def test_offsets_are_the_ones_pint_finds(registry: Any, name: str) -> None:
    measure = known_units()[name]
    kelvin = registry.Quantity(37.0, name).to("kelvin").magnitude
    assert float(measure.scale * 37 + measure.offset) == pytest.approx(kelvin, rel=1e-14)


@pytest.mark.parametrize(
    "text", ["N*s/m", "lbf/in", "(m/s**2)**2/Hz", "kg*m**2", "lbf*s/in", "rad/s", "rpm/s"]
)
def test_products_are_the_ones_pint_finds(registry: Any, text: str) -> None:
    quantity = registry.Quantity(1.0, text).to_root_units()
    measure = measure_of(text, "refused")
    assert float(measure.scale) == pytest.approx(quantity.magnitude, rel=1e-14)
    assert dict(measure.dimension) == {unit: int(power) for unit, power in quantity.unit_items()}


def test_the_cycle_is_a_base_unit() -> None:
    assert dict(measure_of("Hz", "refused").dimension) == {"cycle": 1, "second": -1}
    assert dict(measure_of("rad", "refused").dimension) == {"cycle": 1}


def test_factors_are_exact() -> None:
    assert measure_of("N/mm", "refused").scale == 1000
    assert measure_of("g mm", "gram").scale == Fraction(1, 1_000_000)
    assert measure_of("g", "gravity").scale == Fraction(980665, 100000)


@pytest.mark.parametrize("word", ["Mm", "mPa", "kmin", "Ykg", "mpsi", "millifoot", "kdeg", "g"])
def test_no_automatic_prefixes(word: str) -> None:
    with pytest.raises(UnitTextError) as caught:
        measure_of(word, "refused")
    assert caught.value.unknown == word


def test_reading_units_loads_no_heavy_library() -> None:
    """`detune --help` and the check of a study file rest on this."""
    program = (
        "import sys; from detune.ground import errors, toml_lines, units; "
        "units.parse('4.2 N/mm', 'stiffness'); "
        "print(sorted({'numpy', 'pint', 'pydantic', 'scipy'} & set(sys.modules)))"
    )
    environment = {**os.environ, "PYTHONPATH": str(LIST.parents[2])}
    done = subprocess.run(
        [sys.executable, "-c", program], env=environment, capture_output=True, text=True, check=True
    )
    assert done.stdout.strip() == "[]"
