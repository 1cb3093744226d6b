"""Small study files for the tests: tables written from their keys, and a mass on mounts made of them.

A test states what it is about and takes the rest from here:

    text = study_text("A fan", mass_on_mounts("120 kg", stations={"S": 0.0}), tone("12 Hz", "50 N"),
                      limit("displacement", "0.1 mm"), parts_from("mounts"))
    path = written(tmp_path, text, mounts=mount_list("ash,spring,400,400,0.1,0,9000,yes,15,5"))

Every key stands on a line of its own, so that a test can replace one and find the line of a fault.
"""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

# The tables a study has one of; of all others it may have several.
SINGLE = ("floor", "ballast", "objectives", "scatter", "sizing")
MOUNT_COLUMNS = (
    "part,family,stiffness_z_static [N/mm],stiffness_z_dynamic [N/mm],loss_factor,load_min [N],load_max [N],"
    "pulls,tolerance [%],cost"
)


def written_value(value: Any) -> str:
    """A value as it stands in a study file."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, (list, tuple)):
        return "[" + ", ".join(written_value(each) for each in value) + "]"
    if isinstance(value, Mapping):
        inside = ", ".join(f"{key} = {written_value(each)}" for key, each in value.items())
        return f"{{ {inside} }}" if inside else "{}"
    return f'"{value}"' if isinstance(value, str) else repr(value)


def table(heading: str, /, **keys: Any) -> str:
    """One table, its keys in the order given, and an empty line."""
    head = f"[{heading}]" if heading in SINGLE else f"[[{heading}]]"
    return "\n".join([head, *(f"{key} = {written_value(value)}" for key, value in keys.items())]) + "\n\n"


def study_text(title: str, *tables: str) -> str:
    """A study of these tables."""
    return f'title = "{title}"\n\n' + "".join(tables)


def place(x: float = 0.0, y: float = 0.0, z: float = 0.0) -> list[str]:
    """A position in metres."""
    return [f"{each:g} m" for each in (x, y, z)]


def mass_on_mounts(
    mass: str,
    *,
    stations: Mapping[str, float],
    body: str = "machine",
    point: str = "P",
    group: str = "feet",
    centre: float = 0.0,
    top: float = 0.0,
) -> str:
    """A body that moves up and down, its centre and point at heights (m), its stations at x (m), on a rigid floor."""
    return "".join(
        [
            table("body", name=body, free=["z"], mass=mass, centre=place(z=centre)),
            table("point", name=point, position=place(z=top)),
            *(table("station", name=name, group=group, position=place(x)) for name, x in stations.items()),
            table("floor", kind="rigid"),
        ]
    )


def tone(frequency: str | list[str], force: str, *, at: float = 0.0, name: str = "shaker") -> str:
    """A vertical harmonic force at a height (m)."""
    vector = ["0 N", "0 N", force]
    return table(
        "forcing", kind="harmonic-force", name=name, frequency=frequency, position=place(z=at), force=vector
    )


def limit(kind: str, most: str, *, at: str = "P", measure: str = "peak", **more: Any) -> str:
    """A limit on the vertical motion of a point."""
    return table("allowable", kind=kind, at=at, direction="z", measure=measure, limit=most, **more)


def catalog(name: str, **more: Any) -> str:
    """A parts list in a file of its name."""
    return table("catalog", name=name, file=f"{name}.csv", **more)


def parts_from(name: str, *, group: str = "feet") -> str:
    """A list of mounts, from which a group takes any."""
    return catalog(name) + table("choice", group=group, catalogs=[name])


def mount_list(*rows: str, columns: str = MOUNT_COLUMNS) -> str:
    """A list of parts: its header and a line each."""
    return "\n".join([columns, *rows]) + "\n"


def written(folder: Path, text: str, **lists: str) -> Path:
    """Write a study and its lists, by their names, into a folder, and return the path of the study."""
    for name, rows in lists.items():
        (folder / f"{name}.csv").write_text(rows, encoding="utf-8")
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return path
