"""Strict composing of YAML: which scalars are numbers, and what of the language is not allowed.

Scalars follow the core schema of YAML 1.2 (https://yaml.org/spec/1.2.2/#103-core-schema), not the older rules
PyYAML starts from: ``1e-3`` is a number, ``012`` twelve, and ``no``, ``on``, ``1:30`` and ``1/3`` are text.
"""

from __future__ import annotations

import re
from typing import Any, NamedTuple

import yaml

MAX_DEPTH = 20
# A hundred times what a configuration has; reading takes a second or two for each ten thousand.
MAX_NODES = 20_000

_TAG = "tag:yaml.org,2002:"
_INTEGER = r"[-+]?[0-9]{1,100}"
_FLOAT = r"[-+]?(?:\.[0-9]+|[0-9]+(?:\.[0-9]*)?)(?:[eE][-+]?[0-9]+)?"
_NUMBER = re.compile(f"{_INTEGER}|{_FLOAT}")


class Mark(NamedTuple):
    """A place in the file, both counted from 1."""

    line: int
    column: int


def mark_of(mark: Any) -> Mark:
    """The place that PyYAML counts from 0; the beginning of the file if it knows none."""
    return Mark(1, 1) if mark is None else Mark(mark.line + 1, mark.column + 1)


def looks_like_number(text: str) -> bool:
    """True for text that would be a number without its quotes."""
    return _NUMBER.fullmatch(text) is not None


class StrictLoader(yaml.SafeLoader):
    """Composes nodes with the scalars of YAML 1.2 and stops at too deep a nesting or too many values.

    Attributes
    ----------
    refused : list of (Mark, str)
        Every tag, anchor and alias met; all but the alias are passed over.
    has_alias : bool
        True if an alias was met, whose value is then wanting.
    """

    yaml_implicit_resolvers = {}  # noqa: RUF012 (the table of the parent class must not be inherited)

    def __init__(self, text: str) -> None:
        super().__init__(text)
        self.refused: list[tuple[Mark, str]] = []
        self.has_alias = False
        self._depth = self._count = 0

    def compose_node(self, parent: yaml.Node | None, index: Any) -> yaml.Node | None:
        event: Any = self.peek_event()  # type: ignore[no-untyped-call]
        start, end = event.start_mark, event.end_mark
        self._count += 1
        if self._count > MAX_NODES:
            raise yaml.MarkedYAMLError(problem=f"more than {MAX_NODES} keys and values", problem_mark=start)
        mark = mark_of(start)
        if isinstance(event, yaml.AliasEvent):
            self.get_event()  # type: ignore[no-untyped-call]
            self.has_alias = True
            self.refused.append((mark, f"aliases are not allowed (*{event.anchor}); write the value out"))
            return yaml.ScalarNode(_TAG + "null", "", start, end)
        if event.anchor is not None:
            self.refused.append((mark, f"anchors are not allowed (&{event.anchor}); remove it"))
            event.anchor = None
        if event.tag is not None:
            shown = event.tag.replace(_TAG, "!!")
            self.refused.append((mark, f"tags are not allowed ({shown!r}); remove it"))
            event.tag = None
            event.implicit = (event.style is None, True) if isinstance(event, yaml.ScalarEvent) else True
        self._depth += isinstance(event, yaml.CollectionStartEvent)
        if self._depth > MAX_DEPTH:
            raise yaml.MarkedYAMLError(problem=f"nested deeper than {MAX_DEPTH} levels", problem_mark=start)
        node = super().compose_node(parent, index)
        self._depth -= isinstance(event, yaml.CollectionStartEvent)
        return node


def _add_resolver(kind: str, pattern: str, first: str) -> None:
    # \Z and not $: PyYAML matches from the start only, and $ would let a final line break pass.
    StrictLoader.add_implicit_resolver(_TAG + kind, re.compile(f"(?:{pattern})\\Z"), [*first, ""])


_add_resolver("null", "~|null|Null|NULL|", "~nN")
_add_resolver("bool", "true|True|TRUE|false|False|FALSE", "tTfF")
_add_resolver("int", f"{_INTEGER}|0o[0-7]{{1,100}}|0x[0-9a-fA-F]{{1,100}}", "-+0123456789")
_add_resolver("float", rf"{_FLOAT}|[-+]?\.(?:inf|Inf|INF)|\.(?:nan|NaN|NAN)", "-+.0123456789")


def scalar_value(node: yaml.ScalarNode) -> str | int | float | bool | None:
    """The plain value of a scalar."""
    kind, text = node.tag.removeprefix(_TAG), node.value
    if kind == "null":
        return None
    if kind == "bool":
        return bool(text.lower() == "true")
    if kind == "int":
        base = {"0o": 8, "0x": 16}.get(text[:2], 10)
        return int(text, base)
    if kind == "float":
        # The language's own spelling of infinity and not-a-number has no dot.
        return float(text.lower().replace(".inf", "inf").replace(".nan", "nan"))
    return str(text)
