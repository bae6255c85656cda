"""The vocabulary of a scenario file: every key, its meaning, unit, default and range. The descriptions are the docs."""

from functools import cache
from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Discriminator, Field, Tag, create_model, model_validator

from .block import Block, exactly_one
from .quantities import Plain, Stated, Takes

Coordinate = Annotated[float, Plain("length")]
Distance = Annotated[float, Plain("length", above=0.0)]
Point = Annotated[tuple[Coordinate, Coordinate], Field(json_schema_extra={"items": {"type": ["number", "string"]}})]
Elevation = Annotated[Stated, Takes("length")]
Share = Annotated[float, Plain("number", least=0.0, most=1.0)]


def _form_of(raw: object) -> str | None:
    return {dict: "map", list: "list", str: "text", int: "number", float: "number"}.get(type(raw))


class FileLine(Block):
    """A line or polygon out of a GeoJSON file."""

    file: str
    """GeoJSON file beside the scenario or in a folder below it."""
    where: dict[str, str] = Field(default_factory=dict)
    """Properties that the wanted feature has, such as {name: Elm}; left out where the file holds one feature."""
    thin: Distance | None = None
    """Vertices are dropped as long as the line moves by less than this (length)."""
    crs: str | None = None
    """Coordinate system of the file where it does not say so itself; must be the site's."""


Line = Annotated[
    Annotated[FileLine, Tag("map")] | Annotated[list[Point], Tag("list")] | Annotated[str, Tag("text")],
    Discriminator(_form_of, custom_error_type="form",
                  custom_error_message="expected a list [[x, y], ...], the name of a GeoJSON file or {file: ...}"),
]  # fmt: skip


class DrawAround(Block):
    """The drawn area as a margin round what is given."""

    around: Literal["levels", "everything"] = "everything"
    """What lies inside: `levels`, or `everything` (levels, wells and lines)."""
    by: Distance | None = None
    """Margin (length); default: a tenth of the longer side."""


class DrawBox(Block):
    """The drawn area as a box."""

    x: Point
    """West and east end."""
    y: Point
    """South and north end."""


def _draw_form(raw: object) -> str | None:
    return None if not isinstance(raw, dict) else "box" if "x" in raw or "y" in raw else "around"


class SiteBlock(Block):
    """The frame: coordinates, lengths, heights, the drawn area."""

    crs: str
    """Coordinate system of every coordinate: a projected `EPSG:n`, or `local`."""
    length: Literal["m", "ft", "ft_us"] = "m"
    """Unit of bare lengths, elevations and coordinates."""
    heights: str = "unknown"
    """Vertical datum of every elevation; `unknown` warns."""
    period: str | None = None
    """What the steady field stands for, such as 2024-04 .. 2025-03."""
    draw: Annotated[
        Annotated[DrawAround, Tag("around")] | Annotated[DrawBox, Tag("box")],
        Discriminator(_draw_form, custom_error_type="form",
                      custom_error_message="expected {around: levels, by: 800} or {x: [a, b], y: [c, d]}"),
    ] = DrawAround()  # fmt: skip
    """The drawn area; features outside still act."""


class UnevenBlock(Block):
    """Uneven ground: the error that any smooth model of the aquifer makes."""

    spread: Annotated[Stated, Takes("number", least=0.0, fitted=False)] = Stated(0.5, "1")
    """Standard deviation of ln conductivity, taken as known within a factor of two; default 0.5."""
    patch: Annotated[Stated, Takes("length", above=0.0, fitted=False)] = Stated(300.0, "m")
    """Length of a patch (length), taken as known within a factor of three; default 300 m."""


def _uneven_form(raw: object) -> str | None:
    return "map" if isinstance(raw, dict) else "none" if raw == "none" else None


class AquiferBlock(Block):
    """The aquifer: one layer."""

    base: Elevation
    """Elevation of the underside."""
    top: Elevation | None = None
    """Elevation of the underside of a confining bed; left out = water table throughout."""
    conductivity: Annotated[Stated, Takes("speed", above=0.0)]
    """Hydraulic conductivity."""
    porosity: Annotated[Stated, Takes("number", above=0.0, below=1.0)]
    """Effective porosity; enters times only."""
    storage: Annotated[Stated, Takes("number", above=0.0, below=1.0, fitted=False)] | None = None
    """Storage coefficient; only says how soon a steady answer holds."""
    uneven: Annotated[
        Annotated[UnevenBlock, Tag("map")] | Annotated[Literal["none"], Tag("none")],
        Discriminator(_uneven_form, custom_error_type="form",
                      custom_error_message="expected {spread: 0.5, patch: 300}, or `none` for an ideal sand"),
    ] = UnevenBlock()  # fmt: skip
    """Uneven ground; `none` for an ideal sand."""


class ReferenceBlock(Block):
    """A place whose head is held."""

    at: Point
    """Where, [x, y]."""
    head: Elevation
    """The head there."""


class FlowBlock(Block):
    """Regional flow as it would be without any feature."""

    gradient: Annotated[Stated, Takes("number", least=0.0)] | None = None
    """Fall of head per length at the place `at`."""
    discharge: Annotated[Stated, Takes("discharge", least=0.0)] | None = None
    """Flow per width of aquifer, in place of a gradient."""
    towards: Annotated[Stated, Takes("angle")]
    """Azimuth of the flow: degrees clockwise from grid north."""
    at: Point
    """Where the gradient is meant, [x, y]."""

    _one = exactly_one("gradient", "discharge")


class BeyondBlock(Block):
    """The far field: what comes from beyond the map."""

    balance: Literal["none"] | None = None
    """`none`: no net exchange with afar; the lakes and streams take all."""
    reference: ReferenceBlock | None = None
    """A head that is held at a place; the rest comes from or goes beyond the map."""
    flow: FlowBlock | None = None
    """Regional flow on top."""

    _one = exactly_one("balance", "reference")


def _inflow_form(raw: object) -> str:
    return "none" if raw == "none" else "amount"


class OutlineBlock(Block):
    """An impermeable side of the aquifer, or one with a given inflow."""

    line: Line
    """A ring, or an open line with the aquifer to its left."""
    open: bool = False
    """`true`: the listed points are an open line, not a ring."""
    inflow: Annotated[
        Annotated[Annotated[Stated, Takes("discharge")], Tag("amount")] | Annotated[Literal["none"], Tag("none")],
        Discriminator(_inflow_form),
    ] = "none"
    """What enters along it, per length of line; `none` = impermeable."""


class WellBlock(Block):
    """A well. The sign lives in the verb."""

    at: Point
    """Where, [x, y]."""
    pumps: Annotated[Stated, Takes("rate", least=0.0)] | None = None
    """Rate taken out."""
    injects: Annotated[Stated, Takes("rate", least=0.0)] | None = None
    """Rate put in."""
    radius: Distance | None = None
    """Radius of the screen (length); default 0.15 m."""

    _one = exactly_one("pumps", "injects")


class TableBlock(Block):
    """How a CSV file is written."""

    file: str
    """CSV file with a header row, beside the scenario or in a folder below it."""
    columns: dict[str, str] = Field(default_factory=dict)
    """Which column holds what, {what: name of the column}; columns with our own names need no entry."""
    units: dict[str, str] = Field(default_factory=dict)
    """Units of columns, {what: unit}; without an entry lengths are in `site.length`."""
    delimiter: Literal[",", ";", "tab"] = ","
    """What stands between cells."""
    decimal: Literal[".", ","] = "."
    """What stands before decimals."""
    encoding: str = "utf-8"
    """How letters are stored, such as cp1252."""


class WellsBlock(BaseModel):
    """Wells by name, and `from` for a table of them."""

    model_config = ConfigDict(extra="allow", frozen=True, use_attribute_docstrings=True)
    __pydantic_extra__: dict[str, WellBlock]
    from_: TableBlock | None = Field(None, alias="from")
    """A table with the columns name, x, y, pumps or injects, radius."""


Pair = Annotated[
    tuple[Share, Coordinate], Field(json_schema_extra={"items": {"type": ["number", "string"]}})
]  # share of the length, elevation


def _stage_form(raw: object) -> str | None:
    if isinstance(raw, list):
        return None if not raw else "pairs" if isinstance(raw[0], list) else "vertices"
    return "level" if isinstance(raw, int | float | str) and not isinstance(raw, bool) else None


Stage = Annotated[
    Annotated[list[Pair], Tag("pairs")]
    | Annotated[list[Coordinate], Tag("vertices")]
    | Annotated[Coordinate, Tag("level")],
    Discriminator(_stage_form, custom_error_type="form",
                  custom_error_message="expected [[share of the length, elevation], ...], an elevation for each vertex,"
                                       " or one elevation"),
]  # fmt: skip


class BedBlock(Block):
    """The bed of a stream."""

    resistance: Annotated[Stated, Takes("time", above=0.0)]
    """Thickness of the bed over its conductivity."""
    bottom: str | None = None
    """Underside of the clogged layer, such as `0.8 below stage`."""


class StreamBlock(Block):
    """A stream from source to mouth."""

    line: Line
    """From source to mouth."""
    stage: Stage
    """Water level: [[share of the length, elevation], ...], an elevation for each vertex, or one elevation."""
    shift: Elevation | None = None
    """One shared error of all its stages (length)."""
    width: Distance | None = None
    """Width (length); needed with a bed."""
    bed: BedBlock | None = None
    """Left out = full contact with the aquifer."""
    starts_with: Annotated[Stated, Takes("rate", least=0.0)] | None = None
    """Flow at the source. A stream that would lose more than it carries fails a check; left out = never dry."""
    into: str | None = None
    """The stream that it flows into, at the place nearest to its mouth."""


class LakeBlock(Block):
    """A lake."""

    edge: Line
    """A ring with water inside, or an open line of shore, which gives and takes water on both of its sides."""
    stage: Elevation
    """Water level."""
    land: Literal["inside"] | None = None
    """`inside`: the ring is the shore round an island."""
    open: bool = False
    """`true`: the listed points are an open line, not a ring."""


class RechargeBlock(Block):
    """Recharge on an area. Lakes are left out by itself."""

    area: Line
    """`everywhere`, or a polygon."""
    rate: Annotated[Stated, Takes("speed")] | None = None
    """Water that reaches the aquifer, per area."""
    adds: Annotated[Stated, Takes("speed")] | None = None
    """The same for a patch that comes on top of what falls around it."""

    _one = exactly_one("rate", "adds")


SdByQuality = dict[str, Distance]


class LevelsBlock(TableBlock):
    """Water levels from a table: name, x, y and head, or measuring_point and depth; date, quality, datum as wanted."""

    error: Annotated[
        Annotated[SdByQuality, Tag("map")] | Annotated[Distance, Tag("number")] | Annotated[Distance, Tag("text")],
        Discriminator(_form_of, custom_error_type="form",
                      custom_error_message="expected an sd such as 0.03, or one by quality {surveyed: 0.03, gps: 0.5}"),
    ]  # fmt: skip
    """Standard deviation of a reading (length), one or by the column `quality`."""
    datum_error: SdByQuality = Field(default_factory=dict)
    """Sd of the error that levels with the same entry in the column `datum` share (length)."""
    repeats: Literal["refuse", "mean", "latest"] | None = None
    """What several readings at one place become."""
    leave_out: dict[str, str] = Field(default_factory=dict)
    """Levels that are not fitted, {name: reason}; they stay on the map and in the report."""


class GaugingBlock(Block):
    """A measured flow of a stream."""

    stream: str
    """Name of the stream."""
    at: Share
    """Share of its length, 0 at the source."""
    flow: Annotated[float, Plain("rate", least=0.0)]
    """The measured flow."""
    error: str
    """Standard deviation, as a share of the flow (6%) or a rate."""


class StepBlock(Block):
    """One change of a case."""

    change: str | None = None
    """A value to change, such as wells.Mill 1.pumps."""
    to: Any = None
    """Its new value, with its unit."""
    by: str | None = None
    """A factor (x0.6) or an amount with its unit (-0.5)."""
    add: str | None = None
    """A feature to add, such as wells.Croft."""
    as_: dict[str, Any] | None = Field(None, alias="as")
    """The added feature, written as in the block of its kind."""
    remove: str | None = None
    """A feature to remove, such as wells.Old dairy."""

    _one = exactly_one("change", "add", "remove")


class SolveBlock(Block):
    """How exactly the field is solved."""

    tolerance: Annotated[float, Plain("length", above=0.0)] = 0.001
    """Largest misfit of head on any boundary (length); default 1 mm."""
    seed: Annotated[int, Field(ge=0, strict=True)] = 1
    """Start of the random numbers."""


class _Frame(Block):
    """A whole scenario, but for its questions."""

    wellshed: Literal[1]
    """Version of the vocabulary."""
    title: str
    """Printed on every sheet."""
    site: SiteBlock
    """Coordinates, lengths, heights, the drawn area."""
    aquifer: AquiferBlock
    """The aquifer: one layer."""
    beyond: BeyondBlock
    """The far field; exactly one of `balance` and `reference`."""
    outline: OutlineBlock | None = None
    """An impermeable side."""
    wells: WellsBlock = WellsBlock()  # type: ignore[call-arg]
    """Wells by name."""
    streams: dict[str, StreamBlock] = Field(default_factory=dict)
    """Streams by name."""
    lakes: dict[str, LakeBlock] = Field(default_factory=dict)
    """Lakes by name."""
    recharge: dict[str, RechargeBlock] = Field(default_factory=dict)
    """Recharge by name."""
    levels: LevelsBlock | None = None
    """Water levels; without them nothing is fitted."""
    gaugings: dict[str, GaugingBlock] = Field(default_factory=dict)
    """Stream flows by name."""
    cases: dict[str, list[StepBlock]] = Field(default_factory=dict)
    """Named changes to the fitted field, never fitted again."""
    solve: SolveBlock = SolveBlock()
    """How exactly the field is solved."""


def _as_map(raw: object) -> object:
    """A question named without options has the options of an empty map."""
    if isinstance(raw, str):
        return {raw: {}}
    if isinstance(raw, dict):
        return {key: {} if value is None else value for key, value in raw.items()}
    return raw


@cache
def scenario_model() -> type[BaseModel]:
    """The model of a whole file, with the questions that the package ``questions`` holds."""
    from .questions import options_of, question_names

    names = question_names()
    fields: dict[str, Any] = {
        n: (options_of(n) | None, Field(None, description=(options_of(n).__doc__ or "").strip())) for n in names
    }
    extras: dict[str, Any] = {"_map": model_validator(mode="before")(_as_map), "_one": exactly_one(*names)}
    question = create_model(
        "QuestionBlock", __base__=Block, __validators__=extras, __doc__="A question, {name: options}.", **fields
    )
    asked = Field(min_length=1, description="What is asked.")
    return create_model("ScenarioFile", __base__=_Frame, __doc__="A whole scenario.", questions=(list[question], asked))  # type: ignore[valid-type]
