"""What the fields of a configuration are made of: numbers, fractions, lists and groups of keys."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Annotated, Any

from pydantic import AllowInfNan, BaseModel, BeforeValidator, ConfigDict, Field, GetCoreSchemaHandler, Strict
from pydantic_core import CoreSchema, PydanticCustomError, core_schema

_FRACTION = re.compile(r"([0-9]{1,9})(?:/([0-9]{1,9}))?")
# Far beyond what can be sampled; bounds the memory that a mistyped number takes.
MOST_ELECTRONS = 10_000
# Above this a float no longer holds every whole number.
_LARGEST_EXACT = 2.0**53


class Group(BaseModel):
    """A group of keys: immutable, unknown keys refused, defaults held to the same rules as given values."""

    model_config = ConfigDict(frozen=True, extra="forbid", validate_default=True)


def rule(message: str) -> PydanticCustomError:
    """The error a validator raises to have its message shown as it is."""
    return PydanticCustomError("rule", "{message}", {"message": message})


@dataclass(frozen=True)
class WholeNumber:
    """Annotation of an int: takes whole numbers in a range, 2e4 being one; true and ``"3"`` are none."""

    lowest: int | None = None
    highest: int | None = None
    multiple_of: int | None = None

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        number = core_schema.int_schema(
            strict=True, ge=self.lowest, le=self.highest, multiple_of=self.multiple_of
        )
        return core_schema.no_info_before_validator_function(self._read, number)

    def _read(self, value: object) -> object:
        if isinstance(value, float) and value.is_integer() and abs(value) <= _LARGEST_EXACT:
            return int(value)
        return value


def _no_bool(value: object) -> object:
    # For Python true equals 1, and a choice among numbers would take it.
    if isinstance(value, bool):
        raise ValueError
    return value


#: Finite number; true and '0.5' are none.
Real = Annotated[float, Strict(), AllowInfNan(False)]
Positive = Annotated[Real, Field(gt=0.0)]
Count = Annotated[int, WholeNumber(1)]
Electrons = Annotated[int, WholeNumber(2, MOST_ELECTRONS)]
NotBool = BeforeValidator(_no_bool)


@dataclass(frozen=True)
class ListOf:
    """Annotation of a tuple: takes a list of ``length`` entries, or of any number of them."""

    length: int | None = None

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_before_validator_function(self._read, handler(source))

    def _read(self, value: object) -> tuple[object, ...]:
        if not isinstance(value, list | tuple) or self.length not in (None, len(value)):
            raise ValueError
        return tuple(value)


@dataclass(frozen=True)
class OneOfFractions:
    """Annotation of a `fractions.Fraction`: takes ``"1/3"``, ``1`` or a Fraction out of ``allowed``."""

    allowed: tuple[str, ...]

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(
            self._read, serialization=core_schema.plain_serializer_function_ser_schema(str)
        )

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: Any) -> dict[str, Any]:
        whole = [int(text) for text in self.allowed if "/" not in text]
        return {"enum": [*self.allowed, *whole]}

    def _read(self, value: object) -> Fraction:
        fraction = _fraction(value)
        if fraction not in [Fraction(text) for text in self.allowed]:
            raise ValueError
        return fraction


def _fraction(value: object) -> Fraction:
    if isinstance(value, int | Fraction) and not isinstance(value, bool):
        return Fraction(value)
    match = _FRACTION.fullmatch(value) if isinstance(value, str) else None
    if match is None or int(match[2] or 1) == 0:
        raise ValueError
    return Fraction(int(match[1]), int(match[2] or 1))


def given_key(value: object, key: str) -> bool:
    """True if the value is a group, or an object, with this key."""
    return key in value if isinstance(value, Mapping) else hasattr(value, key)
