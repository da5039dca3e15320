"""The file of a tabulated interaction: found next to the configuration, read and checked with it, and kept in it."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, NamedTuple

from pydantic import GetCoreSchemaHandler, ValidationInfo
from pydantic_core import CoreSchema, core_schema

from mcgeo.problem.table_text import TableError, parse_table
from mcgeo.runs.config_types import rule
from mcgeo.runs.named_files import NamedFiles, NotPlainError, files_of, read_plain

MAX_BYTES = 4_000_000


class TableFile(NamedTuple):
    """A table with its content, so that a result file needs no other file.

    Attributes
    ----------
    name : str
        Path relative to the folder of the configuration.
    content : str
    """

    name: str
    content: str


class ReadTable:
    """Annotation of a `TableFile`: takes a file name, or what it was resolved to, and checks the table."""

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        serialisation = core_schema.plain_serializer_function_ser_schema(TableFile._asdict)
        return core_schema.with_info_plain_validator_function(_read, serialization=serialisation)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: Any) -> dict[str, Any]:
        return {"type": "string"}


def _read(value: object, info: ValidationInfo) -> TableFile:
    if isinstance(value, TableFile):
        table = value
    elif isinstance(value, Mapping) and all(isinstance(value.get(key), str) for key in TableFile._fields):
        table = TableFile(value["name"], value["content"])
    elif isinstance(value, str):
        table = TableFile(value, _content(value, files_of(info.context)))
    else:
        raise ValueError
    try:
        parse_table(table.content)
    except TableError as error:
        raise rule(f"{table.name}: {error}") from None
    return table


def _content(name: str, files: NamedFiles) -> str:
    path = files.path(name)
    try:
        return read_plain(path, MAX_BYTES, "table").decode("utf-8")
    except NotPlainError as error:
        raise rule(f"{name}: {error}") from None
    except UnicodeDecodeError:
        raise rule(f"{name}: is not UTF-8 text") from None


def without_contents(keys: Any) -> Any:
    """The same keys with every table by its name alone, for what people read."""
    if isinstance(keys, Mapping):
        if set(keys) == set(TableFile._fields):
            return keys["name"]
        return {key: without_contents(value) for key, value in keys.items()}
    if isinstance(keys, list | tuple):
        return [without_contents(value) for value in keys]
    return keys
