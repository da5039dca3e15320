"""What is wrong with a configuration and what is allowed, in plain words.

The validation library says where and of which sort; what is allowed is read from the JSON schema, so that
every message about a field names its range.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from difflib import get_close_matches
from typing import Any, NamedTuple

from pydantic import ValidationError

from mcgeo.runs.yaml_nodes import looks_like_number
from mcgeo.runs.yaml_source import Path

Schema = Mapping[str, Any]
_LONGEST = 60
# Last step of the location of a fault of a key itself.
_KEY = "[key]"


class Remark(NamedTuple):
    """What is wrong at a key path, and whether to point at the key rather than at its value."""

    path: Path
    message: str
    at_key: bool = False


class _Place(NamedTuple):
    """A place of the schema; for one form of a group that has several, also its label and all forms."""

    path: Path
    schema: Schema
    label: str = ""
    forms: Schema | None = None


def explain(error: ValidationError, schema: Schema) -> list[Remark]:
    """One remark per fault that the validation found, but for contradictions across groups."""
    found = error.errors(include_url=False)
    return [_remark(details, schema) for details in found if details["type"] != "contradiction"]


def _remark(details: Mapping[str, Any], schema: Schema) -> Remark:
    sort, location, value = details["type"], details["loc"], details["input"]
    if sort == "rule":
        return Remark(_walk(schema, location).path, details["ctx"]["message"], at_key=location[-1] == _KEY)
    if sort in ("missing", "extra_forbidden", "invalid_key"):
        place = _walk(schema, location[:-1])
        describe = _missing if sort == "missing" else _unknown
        return Remark(
            (*place.path, str(location[-1])), describe(place, str(location[-1]), schema), at_key=True
        )
    place = _walk(schema, location)
    forms = _deref(place.schema, schema)
    if sort in ("union_tag_not_found", "union_tag_invalid") and isinstance(value, Mapping):
        key = forms["discriminator"]["propertyName"]
        kinds = {"enum": list(forms["discriminator"]["mapping"])}
        path = (*place.path, key)
        if key not in value:
            return Remark(path, f"missing; must be {_allowed(kinds, schema)}", at_key=True)
        return Remark(path, _wrong(kinds, value[key], schema))
    return Remark(place.path, _wrong(place.forms or place.schema, value, schema))


def _walk(root: Schema, location: tuple[str | int, ...]) -> _Place:
    """Follow a location, whose steps are keys, list positions and the names of chosen forms."""
    place = _Place((), root)
    for step in location:
        schema = _deref(place.schema, root)
        if "oneOf" in schema:
            mapping = schema.get("discriminator", {}).get("mapping", {})
            chosen = {"$ref": mapping.get(step, f"#/$defs/{step}")}
            form = _deref(chosen, root)
            label = (
                f"{schema['discriminator']['propertyName']} {step}" if mapping else " ".join(form["required"])
            )
            place = _Place(place.path, chosen, label, schema)
        elif isinstance(step, int):
            entries = schema.get("prefixItems", ())
            place = _Place((*place.path, step), entries[step] if step < len(entries) else schema["items"])
        elif step != _KEY:
            # A group whose keys are free says what each of them takes.
            names = schema.get("properties", {})
            place = _Place((*place.path, step), names[step] if step in names else schema["additionalProperties"])
    return place


def _deref(schema: Schema, root: Schema) -> Schema:
    """The schema behind a reference and behind 'or null'."""
    if "anyOf" in schema:
        return _deref(next(form for form in schema["anyOf"] if form.get("type") != "null"), root)
    if "$ref" in schema:
        return _deref(root["$defs"][schema["$ref"].rpartition("/")[2]], root)
    return schema


def _other_forms(place: _Place, root: Schema) -> list[Schema]:
    forms = place.forms["oneOf"] if place.forms else ()
    return [_deref(form, root) for form in forms if form != place.schema]


def _missing(place: _Place, key: str, root: Schema) -> str:
    names = _deref(place.schema, root)["properties"]
    message = f"missing; must be {_allowed(names[key], root)}"
    others = [name for form in _other_forms(place, root) for name in form["required"]]
    instead = [name for name in dict.fromkeys(others) if name not in names]
    if instead and "kind" not in names:
        message += f", unless {' or '.join(instead)} is given instead"
    return message


def _unknown(place: _Place, key: str, root: Schema) -> str:
    names = list(_deref(place.schema, root)["properties"])
    allowed = f"allowed are {', '.join(names)}"
    if any(key in form["properties"] for form in _other_forms(place, root)):
        by_kind = "kind" in names
        return f"does not go with {place.label}; {allowed if by_kind else 'remove one of them'}"
    return f"unknown key; {allowed}{_suggestion(key, names)}"


def _wrong(schema: Schema, value: object, root: Schema) -> str:
    choices = [str(choice) for choice in _deref(schema, root).get("enum", ())]
    hint = _suggestion(value, choices) if isinstance(value, str) else ""
    if isinstance(value, str) and looks_like_number(value) and not choices:
        hint = " (remove the quotes)"
    return f"must be {_allowed(schema, root)}, not {show(value)}{hint}"


def _suggestion(word: str, known: list[str]) -> str:
    # Without a letter it is a fraction, and the nearest other fraction is no spelling of it.
    is_word = len(word) <= _LONGEST and re.search("[a-zA-Z]", word)
    close = get_close_matches(word.lower(), known, n=1) if is_word else []
    return f" (did you mean '{close[0]}'?)" if close else ""


def _allowed(schema: Schema, root: Schema) -> str:
    """What a field takes: ``a whole number from 1 to 12``, ``one of torus, disk, or null``."""
    or_null = ", or null" if any(form.get("type") == "null" for form in schema.get("anyOf", ())) else ""
    schema = _deref(schema, root)
    if "enum" in schema:
        words = f"one of {', '.join(dict.fromkeys(str(choice) for choice in schema['enum']))}"
    elif "oneOf" in schema:
        words = f"a group of keys{_form_hint(schema, root)}"
    elif schema["type"] == "object":
        words = "a group of keys" + (f" ({', '.join(schema['properties'])})" if "properties" in schema else "")
    elif schema["type"] == "array":
        words = _list_words(schema, root)
    elif schema["type"] == "string":
        words = "a text"
    else:
        words = "true or false" if schema["type"] == "boolean" else _number_words(schema)
    return words + or_null


def _form_hint(schema: Schema, root: Schema) -> str:
    if "discriminator" in schema:
        kinds = ", ".join(schema["discriminator"]["mapping"])
        return f" with {schema['discriminator']['propertyName']} one of {kinds}"
    return f" with {' or '.join(name for form in schema['oneOf'] for name in _deref(form, root)['required'])}"


def _list_words(schema: Schema, root: Schema, head: str = "a list") -> str:
    entries = [_deref(entry, root) for entry in schema.get("prefixItems") or [schema["items"]]]
    count = f"{len(entries)} " if "prefixItems" in schema else ""
    if not entries[0]:
        return f"{head} of values"
    if "oneOf" in entries[0]:
        return f"{head} of groups of keys{_form_hint(entries[0], root)}"
    if entries[0]["type"] == "array":
        return f"{head} of {count}{_list_words(entries[0], root, 'lists')}"
    if entries[0]["type"] == "object":
        listed = ", ".join(entries[0].get("properties", ()))
        return f"{head} of {count}groups of keys{f' ({listed})' if listed else ''}"
    return f"{head} of {count}{'whole ' if entries[0]['type'] == 'integer' else ''}numbers"


def _number_words(schema: Schema) -> str:
    noun = "a whole number" if schema["type"] == "integer" else "a finite number"
    if schema.get("multipleOf") == 2:
        noun = "an even number"
    if "minimum" in schema and "maximum" in schema:
        return f"{noun} from {schema['minimum']:g} to {schema['maximum']:g}"
    if "minimum" in schema:
        return f"{noun} of at least {schema['minimum']:g}"
    if "exclusiveMinimum" in schema:
        below = f" and below {schema['exclusiveMaximum']:g}" if "exclusiveMaximum" in schema else ""
        return f"{noun} above {schema['exclusiveMinimum']:g}{below}"
    return noun


def show(value: object) -> str:
    """A value as it is written in YAML, cut when long."""
    if value is None or isinstance(value, bool):
        text = {None: "null", True: "true", False: "false"}[value]
    elif isinstance(value, float) and not math.isfinite(value):
        text = ".nan" if math.isnan(value) else "-.inf" if value < 0 else ".inf"
    elif isinstance(value, list | tuple):
        text = f"[{', '.join(show(item) for item in value)}]"
    elif isinstance(value, Mapping):
        text = f"{{{', '.join(f'{key}: {show(item)}' for key, item in value.items())}}}"
    else:
        text = (
            repr(value)
            if isinstance(value, str | int | float)
            else f"an object of type {type(value).__name__}"
        )
    return text if len(text) <= _LONGEST else f"{text[: _LONGEST - 4]} ..."
