"""Parts whose list does not say what kind their damping figure is: read as viscous, and read as a loss factor.

The two agree at the mount's resonance under its rated load and differ twofold well above it, so a limit on a
response is met only where it is met under both.
"""

from collections.abc import Iterable
from dataclasses import replace

from detune.parts.kinds.mount import Mount
from detune.parts.laws import Axes

READ_AS_VISCOUS = "damping read as viscous"
READ_AS_LOSS_FACTOR = "damping read as loss factor"


def readings_of(mounts: Iterable[Mount]) -> tuple[str | None, ...]:
    """Return the readings a response is judged under: None alone where every part's damping kind is known."""
    if any(mount.damping_unknown is not None for mount in mounts):
        return (READ_AS_VISCOUS, READ_AS_LOSS_FACTOR)
    return (None,)


def read_as(mount: Mount, reading: str | None) -> Mount:
    """Return a mount with damping of unknown kind read one way; any other mount is returned as it is.

    The coefficient of a damper beside the mount is kept: it is what stands in `viscous` beyond the reading that
    the list was first taken with.
    """
    unknown = mount.damping_unknown
    if unknown is None or reading is None:
        return mount
    first_viscous = not any(mount.loss_factor)
    beside = _minus(mount.viscous, unknown.viscous) if first_viscous else mount.viscous
    if reading == READ_AS_VISCOUS:
        return replace(
            mount,
            loss_factor=_minus(mount.loss_factor, mount.loss_factor),
            viscous=_plus(unknown.viscous, beside),
        )
    return replace(mount, loss_factor=unknown.loss_factor, viscous=beside)


def _plus(one: Axes, other: Axes) -> Axes:
    x, y, z = (None if a is None or b is None else a + b for a, b in zip(one, other, strict=True))
    return (x, y, z or 0.0)


def _minus(one: Axes, other: Axes) -> Axes:
    x, y, z = (None if a is None or b is None else a - b for a, b in zip(one, other, strict=True))
    return (x, y, z or 0.0)
