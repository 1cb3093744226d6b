"""The one error of this floor that speaks of the machine and not of the caller."""

from __future__ import annotations

from detune.ground.errors import DetuneError


class UnsupportedMachine(DetuneError, ValueError):
    """The stiffness leaves a direction of motion without support, or pushes it away (negative stiffness).

    Raised by the static solution when a direction carries no stiffness, and by the modes when an eigenvalue
    is negative beyond rounding (a machine that topples under its own weight, for example).
    """
