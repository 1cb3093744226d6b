"""Results as strict JSON: what is no finite number becomes null, and nothing is lost in silence."""

import json
import math
from dataclasses import fields, is_dataclass
from pathlib import Path
from typing import Any

import numpy as np


def plain(value: object) -> Any:
    """Return a value of frozen objects, arrays and numbers as dictionaries, lists, texts and finite numbers.

    Raises TypeError for anything else, so that a new kind of result is noticed.
    """
    if value is None or isinstance(value, (str, bool, int)):
        return value
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, np.generic):
        return plain(value.item())
    if isinstance(value, np.ndarray):
        return [plain(item) for item in value.tolist()]
    if isinstance(value, Path):
        return value.as_posix()
    if isinstance(value, dict):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [plain(item) for item in value]
    if is_dataclass(value) and not isinstance(value, type):
        return {field.name: plain(getattr(value, field.name)) for field in fields(value)}
    raise TypeError(f"{type(value).__name__} has no place in a result file")


def json_text(value: object) -> str:
    """Return strict JSON (RFC 8259), indented, with a line end."""
    return json.dumps(plain(value), indent=1, ensure_ascii=False, allow_nan=False) + "\n"
