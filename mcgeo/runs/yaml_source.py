"""Strict reading of one YAML file, with the place of every key and value.

Scalars are those of YAML 1.2. A whole number as a key is its text. Duplicate keys, keys that are neither, tags, anchors
and aliases are refused.
"""

from __future__ import annotations

import os
import re
from collections.abc import Iterable, Iterator
from typing import Any, NamedTuple

import yaml

from mcgeo.errors import ConfigError
from mcgeo.runs.named_files import NotPlainError, read_plain
from mcgeo.runs.yaml_nodes import Mark, StrictLoader, mark_of, scalar_value

Path = tuple[str | int, ...]

MAX_BYTES = 1_000_000

MOST_LINES = 50
_LONGEST_KEY, _LONGEST_MESSAGE = 60, 1000

_BYTE_ORDER_MARK = b"\xef\xbb\xbf"


class Fault(NamedTuple):
    """One thing wrong: where in the file, at which key, and what."""

    mark: Mark
    path: Path
    message: str

    def line(self, file: str) -> str:
        """``file:line:column: key.path: message``."""
        key = f"{dotted(self.path)}: " if self.path else ""
        said = self.message if len(self.message) <= _LONGEST_MESSAGE else f"{self.message[:_LONGEST_MESSAGE]} ..."
        return f"{file}:{self.mark.line}:{self.mark.column}: {key}{said}"


class YamlSource(NamedTuple):
    """The content of a file and where it stands there.

    Attributes
    ----------
    path : str
        The file, as it was named.
    data : dict
        Plain dicts, lists, str, int, float, bool and None.
    marks : dict
        Key path -> where the value begins.
    key_marks : dict
        Key path -> where the key begins; for an entry of a list, where the entry begins.
    """

    path: str
    data: dict[str, Any]
    marks: dict[Path, Mark]
    key_marks: dict[Path, Mark]

    def locate(self, path: Path, *, at_key: bool = False) -> Mark:
        """Place of a value, or of its key; a path that is not in the file gives its nearest parent's key."""
        if path in self.marks:
            return (self.key_marks if at_key else self.marks)[path]
        while path not in self.key_marks:
            if not path:
                return Mark(1, 1)
            path = path[:-1]
        return self.key_marks[path]


def dotted(path: Path) -> str:
    """Key path in words of the file: ``scan.stretch.from``, ``state.points[3]``."""
    return "".join(f"[{key}]" if isinstance(key, int) else f".{_name(key)}" for key in path).removeprefix(".")


def _name(key: str) -> str:
    shown = key if len(key) <= _LONGEST_KEY else f"{key[:_LONGEST_KEY]}..."
    return shown if shown and shown.isprintable() else repr(shown)


def fault_lines(faults: Iterable[Fault], file: str) -> list[str]:
    """A line for each fault, in the order of the file; of very many the first, and how many more there are."""
    ordered = sorted(faults, key=lambda fault: fault.mark)
    lines = [fault.line(file) for fault in ordered[:MOST_LINES]]
    if len(ordered) > MOST_LINES:
        first = ordered[MOST_LINES]
        lines.append(Fault(first.mark, (), f"{len(ordered) - MOST_LINES} more faults from here on").line(file))
    return lines


class _Builder:
    """Turns nodes into plain data, keeping places and faults."""

    def __init__(self) -> None:
        self.marks: dict[Path, Mark] = {}
        self.key_marks: dict[Path, Mark] = {}
        self.faults: list[Fault] = []

    def build(self, node: yaml.Node, path: Path) -> Any:
        self.marks[path] = mark_of(node.start_mark)
        self.key_marks.setdefault(path, self.marks[path])
        if isinstance(node, yaml.ScalarNode):
            return scalar_value(node)
        if isinstance(node, yaml.MappingNode):
            return {key: self.build(value, (*path, key)) for key, value in self._entries(node, path)}
        return [self.build(item, (*path, position)) for position, item in enumerate(node.value)]

    def _entries(self, node: yaml.MappingNode, path: Path) -> Iterator[tuple[str, yaml.Node]]:
        for key_node, value_node in node.value:
            mark = mark_of(key_node.start_mark)
            key = scalar_value(key_node) if isinstance(key_node, yaml.ScalarNode) else None
            if type(key) is int and key >= 0:
                key = str(key)
            if not isinstance(key, str):
                is_scalar = isinstance(key_node, yaml.ScalarNode)
                shown = repr(key_node.value[:_LONGEST_KEY]) if is_scalar else "a list or a group"
                self.faults.append(Fault(mark, path, f"a key must be a name, not {shown}"))
            elif (first := self.key_marks.get((*path, key))) is not None:
                message = f"given twice, first on line {first.line} and again on line {mark.line}; keep one"
                self.faults.append(Fault(mark, (*path, key), message))
            else:
                self.key_marks[(*path, key)] = mark
                yield key, value_node


def _read_text(path: str) -> str:
    try:
        raw = read_plain(path, MAX_BYTES, "configuration")
    except NotPlainError as error:
        raise ConfigError([f"{path}: {error}"]) from None
    raw = raw.removeprefix(_BYTE_ORDER_MARK)
    try:
        return raw.decode("utf-8")
    except UnicodeDecodeError as error:
        mark = _mark_in(raw[: error.start].decode("utf-8"))
        fault = Fault(mark, (), f"not UTF-8 text (byte 0x{raw[error.start]:02x}); save the file as UTF-8")
        raise ConfigError([fault.line(path)]) from None


def _mark_in(text_before: str) -> Mark:
    lines = re.split(r"\r\n|[\r\n\x85\u2028\u2029]", text_before)
    return Mark(len(lines), len(lines[-1]) + 1)


def _syntax_fault(error: Any, text: str) -> Fault:
    if isinstance(error, yaml.reader.ReaderError):
        mark = _mark_in(text[: error.position])
        return Fault(mark, (), f"the character U+{ord(text[error.position]):04X} is not allowed; remove it")
    place = error.problem_mark or error.context_mark
    mark = mark_of(place)
    problem = error.problem or "it cannot be understood"
    if place is not None and text[place.index : place.index + 1] == "\t":
        return Fault(mark, (), "a tab cannot indent or separate here; use spaces")
    if "another document" in problem:
        return Fault(mark, (), "a second document begins here; one file holds one configuration")
    if "nested" in problem or "more than" in problem:
        return Fault(mark, (), problem)
    opened = mark_of(error.context_mark or place)
    began = f", in what began on line {opened.line}" if opened.line < mark.line else ""
    return Fault(mark, (), f"not valid YAML: {problem}{began}")


def _compose(text: str, name: str) -> tuple[yaml.Node | None, list[Fault]]:
    """The document of a file and the faults met in it, each without a key path."""
    loader = None
    try:
        loader = StrictLoader(text)
        node = loader.get_single_node()
    except yaml.YAMLError as error:
        raise ConfigError([_syntax_fault(error, text).line(name)]) from None
    except (ValueError, OverflowError):
        # PyYAML makes characters and integers of escapes and version numbers without checking their range.
        mark = Mark(1, 1) if loader is None else mark_of(loader.get_mark())
        fault = Fault(mark, (), "not valid YAML: an escape or a number here is out of range")
        raise ConfigError([fault.line(name)]) from None
    faults = [Fault(mark, (), message) for mark, message in loader.refused]
    if loader.has_alias:
        raise ConfigError(fault_lines(faults, name))
    return node, faults


def parse_yaml(path: str | os.PathLike[str]) -> tuple[YamlSource, list[Fault]]:
    """Read a file, keeping the faults that leave its other content readable.

    Returns
    -------
    source : YamlSource
        Of a key given twice the first value counts; tags and anchors are passed over.
    faults : list of Fault
        Duplicate keys, keys that are not text, tags and anchors.

    Raises
    ------
    ConfigError
        If the file cannot be read, is no UTF-8, larger than 1 MB, empty, not a group of keys, not valid YAML,
        nested deeper than 20 levels, of more than 20000 keys and values, holds a second document or an alias.
    """
    name = os.fspath(path)
    node, faults = _compose(_read_text(name), name)
    if node is None or (isinstance(node, yaml.ScalarNode) and scalar_value(node) is None):
        empty = Fault(Mark(1, 1), (), "the file is empty; it needs at least the key state")
        raise ConfigError(fault_lines([*faults, empty], name))
    builder = _Builder()
    data = builder.build(node, ())
    if not isinstance(data, dict):
        no_keys = Fault(builder.marks[()], (), "the file must be a group of keys, as in 'state: ...'")
        raise ConfigError(fault_lines([*faults, no_keys], name))
    faults = sorted(faults + builder.faults, key=lambda fault: fault.mark)
    return YamlSource(name, data, builder.marks, builder.key_marks), faults


def load_yaml(path: str | os.PathLike[str]) -> YamlSource:
    """Read a file and refuse every fault that `parse_yaml` knows.

    Raises
    ------
    ConfigError
        With one line per fault.
    """
    source, faults = parse_yaml(path)
    if faults:
        raise ConfigError(fault_lines(faults, source.path))
    return source
