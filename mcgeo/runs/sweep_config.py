"""Keys of ``sweep``: which keys of the configuration take which values."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import AfterValidator, Discriminator, Field, Tag, ValidationInfo, field_validator

from mcgeo.runs.config_types import Count, Group, ListOf, Real, WholeNumber, given_key, rule

#: Most points of a sweep.
MOST_POINTS = 1_000_000

_KEY = "Key of the configuration, as problem.mass.ratio."


def _not_empty(values: tuple[Any, ...]) -> tuple[Any, ...]:
    if not values:
        raise rule("must hold at least one entry")
    return values


def _named(scheduler: str) -> str:
    if not scheduler:
        raise rule("must be an address, as tcp://node7:8786, or the path of a scheduler file")
    return scheduler


class ListAxisConfig(Group):
    """A key with the values it takes."""

    key: str = Field(description=_KEY)
    values: Annotated[tuple[Any, ...], ListOf(), AfterValidator(_not_empty)] = Field(
        description="Values of the key, numbers or whole groups of keys [the key's]."
    )


class RangeAxisConfig(Group):
    """A key with equally spaced values."""

    key: str = Field(description=_KEY)
    from_: Real = Field(alias="from", description="First value [the key's].")
    to: Real = Field(description="Last value [the key's].")
    points: Annotated[int, WholeNumber(2, MOST_POINTS)] = Field(description="Number of values, both ends counted [1].")
    spacing: Literal["linear", "logarithmic"] = Field(
        default="linear", description="Whether differences or ratios of neighbours are equal."
    )

    @field_validator("to")
    @classmethod
    def _other_end(cls, to: float, info: ValidationInfo) -> float:
        if to == info.data.get("from_"):
            raise rule(f"must differ from from, which is {to:g} too")
        return to

    @field_validator("spacing")
    @classmethod
    def _positive_ends(cls, spacing: str, info: ValidationInfo) -> str:
        ends = [info.data[key] for key in ("from_", "to") if key in info.data]
        if spacing == "logarithmic" and any(end <= 0.0 for end in ends):
            raise rule(f"logarithmic needs from and to above 0, not {ends[0]:g} and {ends[-1]:g}")
        return spacing


def _single_form(value: object) -> str:
    return "ListAxisConfig" if given_key(value, "values") else "RangeAxisConfig"


# The tags are the names of the models, by which the JSON schema lists them.
SingleAxisConfig = Annotated[
    Annotated[RangeAxisConfig, Tag("RangeAxisConfig")] | Annotated[ListAxisConfig, Tag("ListAxisConfig")],
    Discriminator(_single_form),
]


class TogetherAxisConfig(Group):
    """Keys that change together, as many values of each."""

    together: Annotated[tuple[SingleAxisConfig, ...], ListOf(), AfterValidator(_not_empty)] = Field(
        description="Axes that run side by side [1]."
    )


class FileAxisConfig(Group):
    """Keys that take their values, together, from the rows of a file of comma-separated values."""

    file: str = Field(description="File inside the folder of the configuration, with a line of headings.")
    columns: dict[str, str] = Field(description="Heading of the column of every key, as {problem.mass.ratio: ratio}.")

    @field_validator("columns")
    @classmethod
    def _some_column(cls, columns: dict[str, str]) -> dict[str, str]:
        if not columns:
            raise rule("must name at least one column, as in {problem.mass.ratio: ratio}")
        return columns


def _form(value: object) -> str:
    if given_key(value, "together"):
        return "TogetherAxisConfig"
    return "FileAxisConfig" if given_key(value, "file") else _single_form(value)


AxisConfig = Annotated[
    Annotated[RangeAxisConfig, Tag("RangeAxisConfig")]
    | Annotated[ListAxisConfig, Tag("ListAxisConfig")]
    | Annotated[TogetherAxisConfig, Tag("TogetherAxisConfig")]
    | Annotated[FileAxisConfig, Tag("FileAxisConfig")],
    Discriminator(_form),
]


class SweepConfig(Group):
    """A grid over keys of the configuration."""

    axes: Annotated[tuple[AxisConfig, ...], ListOf(), AfterValidator(_not_empty)] = Field(
        description="Axes of the grid; the last runs fastest [1]."
    )
    exclude: Annotated[tuple[dict[str, Any], ...], ListOf()] = Field(
        default=(),
        description="Points left out: those with the given value of every given key, or inside its range, as in "
        "{problem.mass.ratio: {above: 4, below: 9}} [1].",
    )
    walker_parts: Count = Field(
        default=1,
        description="Parts into which the walkers of every liquid are divided by whole groups of eight, each for a "
        "worker of its own. Results do not depend on it [1].",
    )
    scheduler: Annotated[str, AfterValidator(_named)] | None = Field(
        default=None,
        description="Scheduler of a dask cluster whose workers do the sweep, as tcp://node7:8786, or its scheduler "
        "file, relative to the configuration; null: processes on this machine.",
    )
