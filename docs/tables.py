"""The generated tables of the documentation. `python docs/tables.py` writes them into the pages again.

A table stands between the marks `<!-- begin: NAME -->` and `<!-- end: NAME -->`; the rest of a page is written by
hand. The tests fail when a table is not what the code says.
"""

import inspect
import re
import sys
import types
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any, Literal, Union, get_args, get_origin

from pydantic.fields import FieldInfo
from pydantic_core import PydanticUndefined

DOCS = Path(__file__).parent
sys.path.insert(0, str(DOCS.parent / "optimizer"))

from detune.brief import allowable, forcing  # noqa: E402
from detune.brief.read import REPEATED, SINGLE  # noqa: E402
from detune.brief.statement import Quantity, Statement  # noqa: E402
from detune.ground import units  # noqa: E402
from detune.parts import kinds  # noqa: E402
from detune.parts.columns import markdown_table  # noqa: E402

# What a key means, wherever it stands; `Class.key` goes before the key alone.
MEANING: dict[str, str] = {
    "name": "name by which other tables and the report call it",
    "kind": "which kind it is",
    "on": "the body it stands or acts on; may be left out where there is one body only",
    "to": "what it stands on: the floor, a body, or a node of the structure",
    "position": "place, in the axes of the study",
    "direction": "axis name or a vector of three numbers, of any length",
    "axis": "axis name or a vector of three numbers",
    "conditions": "the conditions in which it holds; left out: every condition",
    "stations": "the stations at which it holds; left out: every station",
    "measure": "how the amplitude is expressed, and so what the limit is compared with",
    "limit": "the limit",
    "at": "the named point",
    "phase": "phase of the source; left out: unknown, and it then adds in the worst way",
    "shaft": "the shaft of the condition that it follows",
    "duration": "how long it lasts",
    "file": "a CSV file, its path relative to the study file",
    "force": "force along x, y and z, peak",
    "moment": "moment about x, y and z, peak",
    "frequency": "one frequency, or the two ends of a range it may lie anywhere in",
    "break_points": "pairs of frequency and density, straight on log-log axes",
    "velocity_break_points": "the same, of the velocity",
    "displacement_break_points": "the same, of the displacement",
    "corners": "corner frequencies, beside `slopes` and `level`",
    "slopes": "slope between each two corners",
    "level": "frequency of one corner, and the density there",
    "shape": "shape of the pulse, as in IEC 60068-2-27",
    "rise": "share of the duration in which a trapezoid rises; 0.1 where left out",
    "fall": "share of the duration in which a trapezoid falls; 0.1 where left out",
    "damping_ratio": "damping ratio",
    "mass": "mass",
    "orders": "the orders of the shaft",
    "order": "frequency over shaft speed",
    "unbalance": "mass times eccentricity",
    "grade": "balance grade of ISO 21940-11",
    "rotor_mass": "mass of the rotor the grade is for",
    "grade_speed": "highest service speed the rotor was balanced for",
    "torque": "amplitude of the torque, peak",
    "displacement": "amplitude as displacement",
    "velocity": "amplitude as velocity",
    "acceleration": "amplitude as acceleration",
    # Machine
    "Body.name": "name of the body",
    "Body.free": "the directions in which it may move",
    "Body.mass": "mass, beside `centre`",
    "Body.centre": "centre of mass",
    "Body.inertia": "inertia about the centre of mass",
    "Body.inertia_box": "edges of a uniform box of the same mass, where the inertia is not known",
    "Body.shapes": "boxes and cylinders put together, which give mass, centre and inertia",
    "Body.weighing": "corner weighings, which give mass and centre",
    "InertiaTensor.xx": "moment of inertia about x",
    "InertiaTensor.yy": "moment of inertia about y",
    "InertiaTensor.zz": "moment of inertia about z",
    "InertiaTensor.xy": "entry of the tensor, minus the integral of x y dm",
    "InertiaTensor.xz": "entry of the tensor",
    "InertiaTensor.yz": "entry of the tensor",
    "Shape.kind": "box or cylinder",
    "Shape.centre": "its centre",
    "Shape.size": "edges of a box along x, y and z",
    "Shape.radius": "of a cylinder",
    "Shape.length": "of a cylinder",
    "Shape.axis": "of a cylinder",
    "Weighing.positions": "where the supports stood",
    "Weighing.readings": "what each support read",
    "Weighing.centre_height": "height of the centre, which a weighing does not show",
    "Station.group": "stations of one group carry the same part",
    "Station.axial": "direction of the part's axis",
    "Station.radial": "direction of the part's local x",
    "Station.parallel": "how many equal parts stand side by side",
    "Connection.stiffness": "dynamic stiffness along x, y and z",
    "Connection.stiffness_static": "static stiffness; left out: taken as the dynamic one, and said so",
    "Connection.loss_factor": "loss factor of the dynamic stiffness",
    "Connection.viscous": "damping coefficient along x, y and z",
    "Floor.span": "of `span-and-sag`",
    "Floor.width": "width of the strip that takes part",
    "Floor.area_mass": "its mass per area",
    "Floor.sag": "sag under its own weight",
    "Floor.frequency": "first natural frequency, of `frequency-and-mass`",
    "Floor.effective_mass": "effective mass at the machine, of `frequency-and-mass`",
    "Floor.damping_ratio": "left out: 2 %, printed as assumed",
    "Floor.stiffness": "of `mass-spring-damper`",
    "Floor.damping": "of `mass-spring-damper`",
    "Floor.file": "of `dynamic-stiffness`: CSV file with frequency, stiffness, and imaginary or loss_factor",
    "Floor.static_stiffness": "of `dynamic-stiffness`: stiffness for loads at rest",
    "Floor.stations": "of `stiffness-matrix`: the stations in the order of its rows",
    "Floor.directions": "of `stiffness-matrix`: directions that move, for each station; left out: z alone",
    "Floor.stiffness_matrix": "of `stiffness-matrix`: rows of values, or a CSV file",
    "Floor.mass_matrix": "of `stiffness-matrix`: the same of its mass; left out: a floor without mass",
    "Floor.loss_factor": "of `stiffness-matrix`; left out: 4 %, printed as assumed",
    "Structure.mass": "Matrix Market file of the mass matrix",
    "Structure.stiffness": "Matrix Market file of the stiffness matrix",
    "Structure.file": "NPZ file with `mass` and `stiffness`, or with `frequency` and `shapes`",
    "Structure.damping_ratio": "of every mode of the structure",
    "Structure.up_to": "modes above it are left out",
    "Structure.nodes": "named places on the structure",
    "Node.freedoms": "numbers of its freedoms along x, y and z, counted from 0; -1 where held",
    "SteadyLoad.force": "steady force along x, y and z",
    "SteadyLoad.moment": "steady moment about x, y and z",
    # States and conditions
    "State.lost": "stations whose part carries nothing",
    "State.stiffness_factor": "factor on the stiffness of parts, static and dynamic",
    "State.groups": "the groups the factor holds for; left out: all",
    "State.creep": "added to every static deflection, as a share of it",
    "State.temperature": "where parts state tables over temperature",
    "State.packing": "thickness put under a station",
    "Condition.steady": "false where the machine only passes through",
    "Condition.shafts": "lowest and highest speed of each shaft that turns",
    "Condition.state": "the state of the machine it is judged in; left out: as installed",
    "Condition.run_up": "time in which a shaft runs through its range upwards",
    "Condition.coast_down": "time in which a shaft runs through its range downwards",
    "Condition.barred": "bands of a shaft's range in which a steady machine may not dwell",
    # Choices
    "CatalogSource.file": "parts list: CSV, XLSX or Parquet, its path relative to the study file",
    "CatalogSource.kind": "kind of part it lists",
    "CatalogSource.headers": "our column -> the supplier's header",
    "CatalogSource.units": "our column -> its unit, where the supplier's header has none",
    "CatalogSource.constants": "our column -> one value with its unit for the whole list",
    "Choice.group": "the group of stations",
    "Choice.catalogs": "the catalogs its part may come from",
    "Choice.where": "column -> texts admitted, or a window",
    "Choice.parts": "part numbers admitted; left out: all",
    "CatalogSource.sheet": "of a workbook; left out: the first that is not hidden",
    "Choice.sizes": "width and length of the rectangles that pads may be cut to",
    "Choice.parallel": "how many of the same part may stand side by side at each station",
    "Choice.dampers": "damper catalogs, of which one damper or none stands beside each mount",
    "Choice.empty": "whether the group may be left without parts",
    "Window.min": "least value, with its unit",
    "Window.max": "greatest value, with its unit",
    "Ballast.position": "centre of the ballast; with `catalogs` the middle of the face the pieces are stacked on",
    "Ballast.size": "edges of the box, the same for every step",
    "Ballast.steps": "the masses that may be added",
    "Ballast.cost_per_kg": "cost of each kilogram",
    "Ballast.catalogs": "lists of ballast to take pieces from, in place of `size`, `steps` and `cost_per_kg`",
    "Ballast.where": "column -> texts admitted, or a window",
    "Ballast.parts": "part numbers admitted; left out: all",
    "Ballast.pieces": "most pieces of one part number, one upon the other",
    "Ballast.stack": "whether the pieces stand on the face or hang from it",
    "Ballast.empty": "whether none may be taken",
    "Absorber.at": "the named point of a body it is fixed to",
    "Absorber.direction": "along which its mass moves: axis name or a vector of three numbers, of any length",
    "Absorber.catalogs": "the lists of absorbers it may come from",
    "Absorber.where": "column -> texts admitted, or a window",
    "Absorber.parts": "part numbers admitted; left out: all",
    "Absorber.tunings": "frequencies to which absorbers that can be set may be set, besides their listed one",
    "Absorber.empty": "whether it may be left out",
    "Stroke.absorbers": "the absorbers for which it holds; left out: all",
    "Stroke.limit": '`"part"` for the stroke the list states, or a length',
    "Objectives.trade": "the first decides the answer; the front is over all",
    # Sizing
    "Sizing.unknown": "the unknowns",
    "Sizing.made": "the parts made to order, one for each group that has unknowns",
    "Sizing.minimise": "what is to be small; this or `maximise`",
    "Sizing.maximise": "what is to be large; this or `minimise`",
    "Sizing.trade": "two or three of which a front is drawn",
    "Sizing.map": "two unknowns by name, over which the feasible region is drawn",
    "Sizing.starts": "number of local searches",
    "Sizing.seed": "of their starting points: the same seed gives the same answer",
    "Sizing.front_points": "number of points of the front",
    "Sizing.specification": "whether the purchase specification is worked out",
    "SizingUnknown.group": "the group, of stiffness, loss-factor, viscous and absorber unknowns",
    "SizingUnknown.body": "the body of an absorber",
    "SizingUnknown.stations": "the stations that move, of a `position`",
    "SizingUnknown.axis": "which stiffness, or along which axis stations move",
    "SizingUnknown.lower": "least value, with its unit",
    "SizingUnknown.upper": "greatest value, with its unit",
    "SizingUnknown.step": "of ballast that comes in steps",
    "SizingUnknown.name": "name in the report and in `map`",
    "MadePart.group": "the group it stands in",
    "MadePart.dynamic_to_static": "dynamic over static stiffness",
    "MadePart.lateral_ratio": "lateral over axial dynamic stiffness",
    "MadePart.damping_lateral_ratio": "lateral over axial viscous damping",
    "MadePart.stiffness": "axial dynamic stiffness, where it is no unknown",
    "MadePart.loss_factor": "where it is no unknown",
    "MadePart.viscous": "where it is no unknown",
    "MadePart.pulls": "whether it may be in tension",
    "MadePart.load_min": "least static load it may carry",
    "MadePart.load_max": "greatest static load it may carry; left out: any",
    "MadePart.deflection_max": 'its own greatest deflection, for limits of "part"; left out: any',
    "MadePart.free_height": "height without load, where a limit on height asks for it",
    "MadePart.temperature_min": "lowest temperature it stands, where a limit asks for it",
    "MadePart.temperature_max": "highest temperature it stands, where a limit asks for it",
    "MadePart.tolerance": "of its stiffness, plus and minus, where the scatter takes it as listed",
    "MadePart.cost": "cost of one part before what follows is added",
    "MadePart.cost_per_stiffness": "cost of each N/mm of axial stiffness",
    "MadePart.cost_per_loss_factor": "cost of each unit of loss factor",
    "MadePart.cost_per_damping": "cost of each N s/m of axial damping",
    # Forcing
    "HarmonicForce.position": "where the force acts",
    "RandomForce.direction": "of the force; left out: only the couple acts",
    "RandomForce.couple_arm": "couple about x, y and z for each newton of force",
    "Cylinder.offset": "place along the shaft, from `position`",
    "Cylinder.crank_angle": "crank angle past its own top dead centre at the common start",
    "Cylinder.direction": "from the crank to the piston",
    "SliderCrank.axis": "of the crankshaft",
    "SliderCrank.reciprocating_mass": "piston, pin and the reciprocating share of the rod, of one cylinder",
    "SliderCrank.crank_radius": "half the stroke",
    "SliderCrank.rod_length": "between its centres",
    "SliderCrank.cylinders": "the cylinders",
    "SliderCrank.position": "the point of the shaft from which offsets are measured",
    "RotatingUnbalance.axis": "of the shaft; it turns by the right-hand rule",
    "TwoPlaneUnbalance.positions": "of the two planes",
    "TwoPlaneUnbalance.unbalance": "of each plane",
    "TwoPlaneUnbalance.shares": "how the grade's unbalance is split; left out: evenly, printed as assumed",
    "TwoPlaneUnbalance.axis": "of the shaft",
    "TorqueReaction.axis": "about which the torque acts",
    "BandBaseMotion.centres": "band centres, nominal or exact, rising",
    "BandBaseMotion.velocity_rms": "rms velocity of each band",
    "BandBaseMotion.read_as": "whether a band holds a tone or noise; left out: a tone, printed as assumed",
    "BandBaseMotion.duration": "for `noise`",
    "LineSpectrum.measure": "whether amplitudes are peak or rms",
    "LineSpectrum.lines": "the lines",
    "LineSpectrum.on": "for lines of force",
    "LineSpectrum.position": "for lines of force: where it acts",
    "Line.force": "amplitude as force",
    "Line.frequency": "frequency of the line",
    "MeasuredRecord.use": "directly in time, as a density, or as lines",
    "MeasuredRecord.detrend": "what is taken away from the record first",
    "MeasuredRecord.resample": "sample rate to bring it to",
    "MeasuredRecord.between": "how the record runs between its samples",
    "MeasuredRecord.segment": "length of a segment, for `spectrum`",
    "MeasuredRecord.duration": "how long the motion lasts, for `spectrum`",
    "MeasuredRecord.share": "share of the mean square the lines hold, for `lines`; 0.9999 where left out",
    "MeasuredRecord.on": "for a record of force",
    "MeasuredRecord.position": "for a record of force: where it acts",
    "Drop.height": "height of fall",
    "VelocityStep.velocity": "gained at once",
    "BasePulse.amplitude": "peak of the pulse",
    # Allowables
    "BandLimit.at": "the named point, or the floor",
    "BandLimit.criterion": "a named velocity line or the base curve; this, a mask or a file",
    "BandLimit.edition": "of a velocity line; left out: inch, printed as assumed",
    "BandLimit.multiplier": "of the base curve",
    "BandLimit.centres": "band centres of a mask, beside `velocity_rms`",
    "BandLimit.velocity_rms": "limit of each band of a mask",
    "Separation.exempt_amplification": "modes that amplify less are left out of the limit; left out: none is",
    "SettlingTime.to": "share of the amplitude that is left",
    "FloorVelocity.stations": "of a floor of kind `stiffness-matrix`: where it is judged",
    "FloorRatio.direction": "along which the unit force acts: axis name or a vector",
    "FloorRatio.from_frequency": "what lies below is not judged",
    "DwellBands.shaft": "the shaft whose speeds are barred",
    "DwellBands.width": "greatest total width of all bands, in speed; this or `share`",
    "DwellBands.share": "greatest total width as a share of the shaft's range",
    "DwellBands.bands": "how many bands there may be; left out: any number",
    "Transmissibility.of": "ratio of forces or of motions",
    "Transmissibility.at": "the point whose motion is compared, for `motion`",
    "Transmissibility.from_frequency": "what lies below is not judged",
    "TransmittedForce.through": "through one part at each station, or the total",
    "MountDeflection.part": "vibration alone, or static and vibration together",
    "MountDeflection.limit": "a length, or each part's own `deflection_max`",
    "MountDeflection.direction": "in the part's own axes",
    "TransmittedForce.direction": "in the part's own axes, or global for totals",
    "WeightedAcceleration.weighting": "of ISO 2631-1",
    "MachineVelocity.machine": "group of ISO 20816-3 or class of ISO 10816-1",
    "MachineVelocity.boundary": "between which zones",
    "RelativeMotion.to": "the other point, or the floor",
    "Gap.direction": "towards the stop",
    "Gap.stands_on": "the stop moves with the floor, or is another point",
    "Gap.clearance_of": "measured before or after the machine settles on its mounts",
    "Gap.clearance": "distance to the stop",
    "LevelDifference.points": "the points compared",
}


def words_of(annotation: Any, metadata: tuple[Any, ...] = ()) -> str:
    """Return what may be written for a field of this type, as Markdown."""
    for mark in metadata:
        if isinstance(mark, Quantity):
            return _quantity(mark.kind)
    origin, arguments = get_origin(annotation), get_args(annotation)
    if hasattr(annotation, "__metadata__"):
        return words_of(arguments[0], annotation.__metadata__)
    if origin in (Union, types.UnionType):
        kept = [words_of(a) for a in arguments if a is not type(None)]
        return ", or ".join(dict.fromkeys(kept))
    if origin is Literal:
        return ", ".join(f'`"{value}"`' for value in arguments)
    if origin is tuple:
        if len(arguments) == 2 and arguments[1] is Ellipsis:
            return f"list of: {words_of(arguments[0])}"
        each = list(dict.fromkeys(words_of(a) for a in arguments))
        count = {2: "two", 3: "three"}[len(arguments)]
        return f"{count} values: " + " and ".join(each)
    if origin is dict:
        return f"table of name = {words_of(arguments[1])}"
    if isinstance(annotation, type) and issubclass(annotation, Statement):
        return f"table, see `{annotation.__name__}` below"
    return {str: "text", bool: "`true` or `false`", int: "whole number", float: "number"}[annotation]


def _quantity(kind: str) -> str:
    unit = units.KINDS[kind]
    if unit.bare_number:
        return (
            f"{unit.meaning}, `{unit.examples[-1]}`"
            if kind == "cost"
            else f'{unit.meaning}, `0.1` or `"10 %"`'
        )
    return f'{unit.meaning}, `"{unit.examples[0]}"`'


# Keys of which one group is due where the other is left out.
LEFT_OUT: dict[str, str] = {
    "Ballast.size": "required without `catalogs`",
    "Ballast.steps": "required without `catalogs`",
    "Ballast.cost_per_kg": "required without `catalogs`",
}


def default_of(field: FieldInfo) -> str:
    """Return what holds where a key is left out."""
    if field.is_required():
        return "required"
    value = field.get_default(call_default_factory=True)
    if value is None or value is PydanticUndefined or value == () or value == {}:
        return "left out"
    kind = next((mark.kind for mark in field.metadata if isinstance(mark, Quantity)), None)
    if kind is not None and isinstance(value, float):
        return f"`{units.show(value, kind)}`"
    if isinstance(value, bool):
        return f"`{str(value).lower()}`"
    if isinstance(value, tuple):
        return "`[" + ", ".join(f'"{v}"' if isinstance(v, str) else f"{v:g}" for v in value) + "]`"
    return f'`"{value}"`' if isinstance(value, str) else f"`{value}`"


def meaning_of(cls: type[Statement], key: str) -> str:
    """Return the meaning of a key; the text above the table says more."""
    for each in cls.__mro__:
        found = MEANING.get(f"{each.__name__}.{key}")
        if found:
            return found
    return MEANING.get(key, "see above")


def nested_of(cls: type[Statement]) -> dict[str, type[Statement]]:
    """Return the statements that stand inside this one, by key."""

    def inside(annotation: Any) -> type[Statement] | None:
        if isinstance(annotation, type):
            return annotation if issubclass(annotation, Statement) else None
        return next((found for a in get_args(annotation) if (found := inside(a))), None)

    return {key: found for key, field in cls.model_fields.items() if (found := inside(field.annotation))}


def key_table(cls: type[Statement], left_out: tuple[str, ...] = ()) -> str:
    """Return the keys of a statement as a Markdown table."""
    lines = ["| key | what to write | where left out | meaning |", "|---|---|---|---|"]
    for key, field in cls.model_fields.items():
        if key not in left_out:
            what = words_of(field.annotation, tuple(field.metadata))
            default = LEFT_OUT.get(f"{cls.__name__}.{key}") or default_of(field)
            lines.append(f"| `{key}` | {what} | {default} | {meaning_of(cls, key)} |")
    return "\n".join(lines) + "\n"


def prose_of(cls: type[Statement]) -> str:
    """Return the docstring of a statement as Markdown."""
    text = inspect.cleandoc(cls.__doc__ or "")
    return "\n\n".join(" ".join(part.split()) for part in text.split("\n\n"))


def section(cls: type[Statement], title: str, left_out: tuple[str, ...] = (), depth: int = 3) -> str:
    """Return one statement with the statements inside it."""
    parts = [f"{'#' * depth} {title}\n", prose_of(cls) + "\n", key_table(cls, left_out)]
    for key, inner in nested_of(cls).items():
        parts += [f"`{inner.__name__}`, under `{key}`: {prose_of(inner)}\n", key_table(inner)]
    return "\n".join(parts)


def plain_tables() -> str:
    """Return the tables of a study that have one form."""
    single = [section(cls, f"`[{name}]`") for name, cls in SINGLE.items()]
    repeated = [section(cls, f"`[[{name}]]`") for name, cls in REPEATED.items()]
    return "\n".join([*repeated, *single])


def kind_tables(known: Mapping[str, type[Statement]]) -> str:
    """Return the tables of all kinds of forcing, or of all kinds of allowable."""
    return "\n".join(section(cls, f"`{name}`", ("kind",)) for name, cls in known.items())


def unit_table() -> str:
    """Return the kinds of number with their SI unit and examples."""
    lines = ["| kind of number | SI unit | examples | bare number |", "|---|---|---|---|"]
    for kind in units.KINDS.values():
        examples = ", ".join(f"`{example}`" for example in kind.examples)
        lines.append(
            f"| {kind.meaning} | {kind.si_unit or '-'} | {examples} | {'yes' if kind.bare_number else 'no'} |"
        )
    return "\n".join(lines) + "\n"


def column_tables() -> str:
    """Return the columns of every kind of part."""
    parts = []
    for name, kind in kinds.KINDS.items():
        table = re.sub(r"<(?=\w+>)(?![^|`]*`)", "&lt;", markdown_table(kind.COLUMNS))
        parts += [f"### {name}\n", table]
    return "\n".join(parts)


TABLES: dict[str, dict[str, Callable[[], str]]] = {
    "study-file.md": {
        "tables": plain_tables,
        "forcing": lambda: kind_tables(forcing.KINDS),
        "allowable": lambda: kind_tables(allowable.KINDS),
        "units": unit_table,
    },
    "catalogs.md": {"columns": column_tables},
}


def with_tables(page: str, text: str) -> str:
    """Return the text of a page with its generated tables put in."""
    for name, made in TABLES[page].items():
        begin, end = f"<!-- begin: {name} -->", f"<!-- end: {name} -->"
        before, _, rest = text.partition(begin)
        _, found, after = rest.partition(end)
        if not found:
            raise ValueError(f"{page} has no marks for the table {name}")
        text = f"{before}{begin}\n\n{made()}\n{end}{after}"
    return text


def main() -> None:
    """Write the tables of every page again."""
    for page in TABLES:
        path = DOCS / page
        path.write_text(with_tables(page, path.read_text(encoding="utf-8")), encoding="utf-8")


if __name__ == "__main__":
    main()
