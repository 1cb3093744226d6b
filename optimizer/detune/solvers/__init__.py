"""Floor 5: solvers, one file a method. A new solver is one file and one line in `SOLVERS`."""

from types import ModuleType

from detune.solvers import enumeration

SOLVERS: dict[str, ModuleType] = {
    enumeration.NAME: enumeration,
}

__all__ = ["SOLVERS"]
