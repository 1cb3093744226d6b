"""The small study of this folder, run once, and variants of it made by replacing text."""

import shutil
from collections.abc import Callable
from pathlib import Path

import pytest

from detune.report.folder import write_folder
from detune.solvers.outcome import Settings
from detune.study.load import load_study
from detune.study.named import named_design
from detune.study.run import Result, run_study

HERE = Path(__file__).parent
Variant = Callable[..., Result]


@pytest.fixture(scope="session")
def variant(tmp_path_factory: pytest.TempPathFactory) -> Variant:
    """Run the small study with texts replaced, more text after it, named designs, or a time limit."""

    def run(
        *replaced: tuple[str, str],
        more: str = "",
        named: tuple[str, ...] = (),
        time_limit: float | None = None,
    ) -> Result:
        folder = tmp_path_factory.mktemp("study")
        shutil.copy(HERE / "small_list.csv", folder)
        text = (HERE / "small_study.toml").read_text(encoding="utf-8") + more
        for old, new in replaced:
            assert old in text
            text = text.replace(old, new)
        (folder / "study.toml").write_text(text, encoding="utf-8")
        study = load_study(folder / "study.toml")
        designs = tuple(named_design(study.brief, study.catalogs, name) for name in named)
        return run_study(study, Settings(time_limit=time_limit), compared=designs)

    return run


@pytest.fixture(scope="session")
def result(variant: Variant) -> Result:
    return variant(named=("feet=teasel-c, ballast=0 kg",))


@pytest.fixture(scope="session")
def folder(result: Result, tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_folder(result, tmp_path_factory.mktemp("results") / "press")


@pytest.fixture(scope="session")
def nothing_meets(variant: Variant) -> Result:
    """A velocity limit of 2 mm/s is below the 9.8 mm/s that any mount leaves at 30 Hz: U w^3 / (m w^2) = 9.4 mm/s."""
    return variant(('limit = "12 mm/s"', 'limit = "2 mm/s"'))
