"""The figures that the benchmarks measure, written as one JSON file at the end of the run."""

from __future__ import annotations

import json
import os
import platform
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest


def pytest_addoption(parser: pytest.Parser) -> None:
    parser.addoption(
        "--benchmark-json-out", default=None, help="file for the figures of the benchmarks (JSON)"
    )
    parser.addoption("--benchmark-long", action="store_true", help="also measure what takes minutes")


@pytest.fixture(scope="session")
def all_figures() -> dict[str, Any]:
    """The figures of the whole run."""
    return {
        "machine": {
            "cores": os.cpu_count(),
            "architecture": platform.machine(),
            "python": platform.python_version(),
        }
    }


@pytest.fixture
def figures(request: pytest.FixtureRequest, all_figures: dict[str, Any]) -> Iterator[dict[str, Any]]:
    """Where each benchmark puts its figures, by name; written after each, and beside those of an earlier run."""
    yield all_figures
    stated = request.config.getoption("--benchmark-json-out") or os.environ.get("DETUNE_BENCHMARK_JSON")
    if stated:
        path = Path(stated)
        earlier = json.loads(path.read_text(encoding="utf-8")) if path.exists() else {}
        path.write_text(json.dumps({**earlier, **all_figures}, indent=1) + "\n", encoding="utf-8")


@pytest.fixture(scope="session")
def long(request: pytest.FixtureRequest) -> bool:
    """Whether the measurements that take minutes are wanted."""
    return bool(request.config.getoption("--benchmark-long"))
