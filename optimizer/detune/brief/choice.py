"""What may be chosen: catalogs, the parts each group may take, and ballast in steps or from a list."""

from typing import Annotated, Literal

from pydantic import AfterValidator, BeforeValidator, ConfigDict, Field, field_validator, model_validator

from detune.brief.statement import (
    Cost,
    Length,
    Mass,
    Name,
    Position,
    Statement,
    Text,
    describe,
    listed_once,
    positive,
    refuse,
)

Objective = Literal["cost", "separation", "least-margin", "added-mass", "part-numbers"]
LARGER_IS_BETTER: dict[str, bool] = {
    "cost": False,
    "separation": True,
    "least-margin": True,
    "added-mass": False,
    "part-numbers": False,
}


class CatalogSource(Statement):
    """A parts list. `file` is taken relative to the study file.

    `sheet` names the sheet of a workbook that has several. `headers` maps our column names to the
    supplier's, `units` gives the unit of a mapped column, `constants` gives one value (with its unit) for a
    column the list does not have.
    """

    name: Name
    file: Text
    kind: Name = "mount"
    sheet: Name | None = None
    headers: dict[Name, Text] = {}
    units: dict[Name, Text] = {}
    constants: dict[Name, Text] = {}

    @field_validator("file")
    @classmethod
    def _a_path(cls, value: str) -> str:
        if not value.strip() or "\0" in value:
            raise refuse(value.replace("\0", ""), 'the path of a parts list, for example "parts.csv"')
        return value


def _as_text(value: object) -> object:
    """Return a bare number as text: whether its column may go without a unit is known where the column is."""
    if isinstance(value, bool) or not isinstance(value, (str, int, float)):
        raise refuse(value, 'a value with its unit, in quotes, for example "400 N/mm"')
    return value if isinstance(value, str) else describe(value)


WindowEnd = Annotated[Text, BeforeValidator(_as_text)]


class Window(Statement):
    """Lowest and highest admitted value of a catalog column, each with its unit."""

    min: WindowEnd | None = None
    max: WindowEnd | None = None

    @model_validator(mode="after")
    def _one_end(self) -> "Window":
        if self.min is None and self.max is None:
            raise refuse("{}", 'a window with "min", "max" or both')
        return self


def _some_catalogs(value: tuple[str, ...]) -> tuple[str, ...] | None:
    if not value:
        raise refuse("[]", "at least one catalog")
    return listed_once(value)


# What a statement says of the rows it takes: of which lists, filtered by which columns, or named one by one.
CatalogNames = Annotated[tuple[Name, ...], AfterValidator(_some_catalogs)]
Where = dict[Name, tuple[Text, ...] | Window]
PartNames = Annotated[tuple[Name, ...] | None, AfterValidator(listed_once)]


class Choice(Statement):
    """The parts one group may take: from which catalogs, filtered by columns, or named one by one.

    `catalogs` are lists of mounts or of pads. `sizes`: width and length of the rectangles a pad may be cut to, along
    the local x and y of its station; a pad takes every size that its sheet and its range of shape factors allow.
    `parallel`: how many of the same part may stand side by side at each station, for example [1, 2].
    `dampers`: damper catalogs of which one damper, or none, may stand beside each mount. `empty`: whether
    the group may be left without parts.
    """

    group: Name
    catalogs: CatalogNames
    where: Where = {}
    parts: PartNames = None
    sizes: tuple[tuple[Length, Length], ...] = ()
    parallel: tuple[int, ...] = (1,)
    dampers: tuple[Name, ...] = ()
    empty: bool = False

    @field_validator("sizes")
    @classmethod
    def _sizes(cls, value: tuple[tuple[float, float], ...]) -> tuple[tuple[float, float], ...]:
        for size in value:
            if min(size) <= 0.0:
                raise refuse(f"{1e3 * size[0]:g} x {1e3 * size[1]:g} mm", "a width and a length above zero")
        if len(set(value)) != len(value):
            raise refuse("a size twice", "each size once")
        return value

    @field_validator("parallel")
    @classmethod
    def _counts(cls, value: tuple[int, ...]) -> tuple[int, ...]:
        if not value or min(value) < 1 or len(set(value)) != len(value):
            raise refuse(list(value), "different whole numbers, each 1 or more, for example [1, 2]")
        return value


class Ballast(Statement):
    """Mass that may be added: in steps of a uniform box, or as pieces of a list.

    In steps: a box of `size` centred at `position`, grown at constant size; each of `steps` is a total mass (put
    "0 kg" in the list to allow none) at `cost_per_kg`. From a list: up to `pieces` equal pieces of one row of
    `catalogs`, filtered by `where` and `parts`, one upon the other, with their own mass, size and price; `position`
    is then the middle of the face they are stacked on, `stack` whether "up" or "down" from it, and `empty` whether
    none may be taken. No more pieces are taken than the list states in stock.
    """

    model_config = ConfigDict(
        json_schema_extra={
            "oneOf": [{"required": ["size", "steps", "cost_per_kg"]}, {"required": ["catalogs"]}]
        }
    )

    on: Name | None = None
    position: Position
    size: tuple[Length, Length, Length] = (0.0, 0.0, 0.0)
    steps: tuple[Mass, ...] = ()
    cost_per_kg: Cost = 0.0
    catalogs: tuple[Name, ...] = ()
    where: Where = {}
    parts: PartNames = None
    pieces: int = Field(default=1, strict=True)
    stack: Literal["up", "down"] = "up"
    empty: bool = True

    @model_validator(mode="after")
    def _one_way(self) -> "Ballast":
        ladder, listed = ("size", "steps", "cost_per_kg"), ("where", "parts", "pieces", "stack", "empty")
        stated = self.model_fields_set
        if "catalogs" in stated:
            listed_once(self.catalogs)
            for key in ladder:
                if key in stated:
                    raise refuse(
                        key, f'no "{key}" beside "catalogs": the pieces of the list have their own', at=key
                    )
            if self.pieces < 1:
                raise refuse(self.pieces, "a whole number of pieces, 1 or more", at="pieces")
            return self
        for key in ladder:
            if key not in stated:
                raise refuse("", f'"{key}", which has no default (or "catalogs", to take pieces of a list)')
        for key in listed:
            if key in stated:
                raise refuse(
                    key, f'"{key}" beside "catalogs" alone, the lists that pieces are taken from', at=key
                )
        return self._sound_steps()

    def _sound_steps(self) -> "Ballast":
        if not self.steps:
            raise refuse("[]", 'at least one step, for example ["0 kg", "40 kg"]', at="steps")
        if min(self.steps) < 0.0:
            raise refuse(f"{min(self.steps):g} kg", "steps of zero or more", at="steps")
        if len(set(self.steps)) != len(self.steps):
            raise refuse(", ".join(f"{step:g} kg" for step in self.steps), "each step once", at="steps")
        for side in self.size:
            positive(side, "a box side", at="size")
        if self.cost_per_kg < 0.0:
            raise refuse(f"{self.cost_per_kg:g}", "a cost of zero or more", at="cost_per_kg")
        return self


class Objectives(Statement):
    """What is traded, two or three of: cost, separation, least-margin, added-mass, part-numbers.

    The first one decides the answer; the front is drawn over all of them.
    """

    trade: tuple[Objective, ...] = ("cost", "separation")

    @field_validator("trade")
    @classmethod
    def _two_or_three(cls, value: tuple[Objective, ...]) -> tuple[Objective, ...]:
        if not 2 <= len(value) <= 3 or len(set(value)) != len(value):
            raise refuse(list(value), "two or three different objectives")
        return value
