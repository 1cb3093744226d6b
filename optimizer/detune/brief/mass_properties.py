"""Mass, centre and inertia of a body from whichever way the brief states them."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.machine import Body, Shape
from detune.ground.units import STANDARD_GRAVITY, show
from detune.physics import rigid_body

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class MassProperties:
    """Mass kg, centre (3,) m in the brief's axes, inertia (3, 3) kg m^2 about the centre."""

    mass: float
    centre: Floats
    inertia: Floats
    assumed: tuple[str, ...]


def mass_properties(body: Body) -> MassProperties:
    """Return the mass properties of a body and what had to be assumed for them."""
    if body.shapes:
        mass, centre, inertia = rigid_body.combine(
            np.array([shape.mass for shape in body.shapes]),
            np.array([shape.centre for shape in body.shapes]),
            np.array([_shape_inertia(shape) for shape in body.shapes]),
        )
        note = f"{body.name}: inertia from {len(body.shapes)} uniform boxes and cylinders put together"
        return MassProperties(float(mass), centre, inertia, (note,))
    assumed: list[str] = []
    if body.weighing is not None:
        mass, x, y = rigid_body.weighed_mass_and_centre(
            np.array(body.weighing.positions), np.array(body.weighing.readings)
        )
        mass_value, centre_value = float(mass), np.array([x, y, body.weighing.centre_height], dtype=float)
        assumed.append(
            f"{body.name}: mass {show(mass_value, 'mass')} and centre from {len(body.weighing.readings)} weighings"
            f" with gravity {STANDARD_GRAVITY} m/s^2; the height of the centre is the stated one"
        )
    else:
        assert body.mass is not None and body.centre is not None  # held by Body's own check
        mass_value, centre_value = body.mass, np.array(body.centre, dtype=float)
    inertia_value = np.zeros((3, 3))
    if body.inertia is not None:
        inertia_value = body.inertia.matrix()
    elif body.inertia_box is not None:
        inertia_value = rigid_body.box_inertia(mass_value, np.array(body.inertia_box))
        assumed.append(
            f"{body.name}: inertia of a uniform box of the stated size, centred on the mass centre"
        )
    return MassProperties(mass_value, centre_value, inertia_value, tuple(assumed))


def _shape_inertia(shape: Shape) -> Floats:
    if shape.kind == "box":
        assert shape.size is not None  # held by Shape's own check
        return rigid_body.box_inertia(shape.mass, np.array(shape.size))
    assert shape.radius is not None and shape.length is not None and shape.axis is not None
    return rigid_body.cylinder_inertia(shape.mass, shape.radius, shape.length, "xyz".index(shape.axis))
