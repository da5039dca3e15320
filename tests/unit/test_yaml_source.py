"""Strict reading of YAML: scalars, places, and everything that is refused."""

import math
import re
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mcgeo.errors import ConfigError
from mcgeo.runs.yaml_source import MAX_BYTES, YamlSource, dotted, load_yaml, parse_yaml


def faults(path: str) -> list[str]:
    with pytest.raises(ConfigError) as caught:
        load_yaml(path)
    return caught.value.faults


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("1e-3", 1e-3),
        ("1E+3", 1e3),
        ("-.5", -0.5),
        ("5.", 5.0),
        ("012", 12),
        ("-7", -7),
        ("0o17", 15),
        ("0x1F", 31),
        ("1:30", "1:30"),
        ("1/3", "1/3"),
        ("1_000", "1_000"),
        ("0b11", "0b11"),
        ("2024-01-31", "2024-01-31"),
        ("no", "no"),
        ("on", "on"),
        ("Yes", "Yes"),
        ("true", True),
        ("FALSE", False),
        ("'1e-3'", "1e-3"),
        ('"true"', "true"),
        ("", None),
        ("~", None),
        ("Null", None),
        ("nothing", "nothing"),
        (".inf", math.inf),
        ("-.INF", -math.inf),
        ("inf", "inf"),
        ("[1, 2.0]", [1, 2.0]),
    ],
)
def test_scalars_follow_the_core_schema(write, text, value):
    read = load_yaml(write(f"key: {text}\n")).data["key"]
    assert read == value
    assert type(read) is type(value)


def test_not_a_number_is_read_as_one(write):
    assert math.isnan(load_yaml(write("key: .NaN\n")).data["key"])


def test_an_integer_too_long_for_the_language_is_a_float(write):
    assert load_yaml(write(f"key: {'1' * 5000}\n")).data["key"] == math.inf


def test_the_merge_key_is_an_ordinary_key(write):
    assert load_yaml(write("<<: {a: 1}\n")).data == {"<<": {"a": 1}}


def test_marks_of_keys_and_values(write):
    source = load_yaml(write("# head\nstate:\n  kind: laughlin\n  points:\n    - [1, 2]\nempty:\n"))
    assert source.marks[("state",)] == (3, 3)
    assert source.key_marks[("state",)] == (2, 1)
    assert source.marks[("state", "kind")] == (3, 9)
    assert source.key_marks[("state", "kind")] == (3, 3)
    assert source.marks[("state", "points", 0, 1)] == (5, 11)
    assert source.marks[("empty",)] == (6, 7)


def test_a_missing_place_is_that_of_the_nearest_parent(write):
    source = load_yaml(write("a: 1\nstate:\n  kind: laughlin\n"))
    assert source.locate(("state", "kind")) == (3, 9)
    assert source.locate(("state", "kind"), at_key=True) == (3, 3)
    assert source.locate(("state", "electrons")) == (2, 1)
    assert source.locate(("scan", "stretch")) == (1, 1)


def test_a_byte_order_mark_does_not_shift_the_columns(write):
    assert load_yaml(write(b"\xef\xbb\xbfstate: 1\n")).marks[("state",)] == (1, 8)


def test_duplicate_keys_name_both_lines(write):
    path = write("a:\n  b: 1\n  c: 2\n  b: 3\na: {}\n")
    assert faults(path) == [
        "run.yaml:4:3: a.b: given twice, first on line 2 and again on line 4; keep one",
        "run.yaml:5:1: a: given twice, first on line 1 and again on line 5; keep one",
    ]
    source, found = parse_yaml(path)
    assert source.data == {"a": {"b": 1, "c": 2}}
    assert len(found) == 2


@pytest.mark.parametrize("key", ["1.0", "-1", "true", "~", "[a]", "{a: 1}"])
def test_a_key_must_be_text(write, key):
    (fault,) = faults(write(f"a:\n  ? {key}\n  : 1\n"))
    assert fault.startswith("run.yaml:2:5: a: a key must be a name, not ")


def test_a_whole_number_as_a_key_is_its_text(write):
    source = load_yaml(write("a: {1: 2, 0x10: 3}\n"))
    assert source.data == {"a": {"1": 2, "16": 3}}
    assert source.locate(("a", "1")) == (1, 8)
    assert faults(write("a: {1: 2, '1': 3}\n")) == [
        "run.yaml:1:11: a.1: given twice, first on line 1 and again on line 1; keep one"
    ]


def test_anchors_and_tags_are_all_listed(write):
    assert faults(write("a: &x 1\nb: !!str 2\nc: !own {d: 3}\n")) == [
        "run.yaml:1:4: anchors are not allowed (&x); remove it",
        "run.yaml:2:4: tags are not allowed ('!!str'); remove it",
        "run.yaml:3:4: tags are not allowed ('!own'); remove it",
    ]


def test_a_tag_does_not_change_a_value(write):
    source, found = parse_yaml(write("a: !!str 2\nb: !!python/object:os.system [x]\n"))
    assert source.data == {"a": 2, "b": ["x"]}
    assert len(found) == 2


def test_aliases_are_refused(write):
    assert faults(write("a: &x 1\nb: *x\n")) == [
        "run.yaml:1:4: anchors are not allowed (&x); remove it",
        "run.yaml:2:4: aliases are not allowed (*x); write the value out",
    ]


def test_twenty_levels_are_read_and_no_more(write):
    assert load_yaml(write("a: " + "[" * 19 + "]" * 19)).data["a"]
    assert faults(write("a: " + "[" * 20 + "]" * 20)) == ["run.yaml:1:23: nested deeper than 20 levels"]
    assert faults(write("a: " + "[" * 100_000)) == ["run.yaml:1:23: nested deeper than 20 levels"]


@pytest.mark.parametrize(
    ("content", "expected"),
    [
        ("", "run.yaml:1:1: the file is empty; it needs at least the key state"),
        ("# only a remark\n", "run.yaml:1:1: the file is empty; it needs at least the key state"),
        ("---\n...\n", "run.yaml:1:1: the file is empty; it needs at least the key state"),
        ("\n- a\n- b\n", "run.yaml:2:1: the file must be a group of keys, as in 'state: ...'"),
        ("state\n", "run.yaml:1:1: the file must be a group of keys, as in 'state: ...'"),
        (
            "a: 1\n---\nb: 2\n",
            "run.yaml:2:1: a second document begins here; one file holds one configuration",
        ),
        ("a:\n\tb: 1\n", "run.yaml:2:1: a tab cannot indent or separate here; use spaces"),
        ("a: 1\nb:\t2\n", "run.yaml:2:3: a tab cannot indent or separate here; use spaces"),
        ("a: 1\nb: \x07\n", "run.yaml:2:4: the character U+0007 is not allowed; remove it"),
        (b"a: 1\nb: \xc3\xa9\xff\n", "run.yaml:2:5: not UTF-8 text (byte 0xff); save the file as UTF-8"),
        ("a: b: c\n", "run.yaml:1:5: not valid YAML: mapping values are not allowed here"),
    ],
)
def test_faults_of_a_whole_file(write, content, expected):
    assert faults(write(content)) == [expected]


@pytest.mark.parametrize(
    ("content", "place"),
    [
        ("a: [1, 2\nb: 3\n", "2:2"),
        ("a: 'open\n", "2:1"),
        ("a: 1\n  b: 2\n", "2:4"),
        ("a: {b: 1]\n", "1:9"),
        ('a: "\\q"\n', "1:6"),
        ('a: "\\UFFFFFFFF"\n', "1:7"),
        ("%YAML 3.0\n---\na: 1\n", "1:1"),
        (f"%YAML {'1' * 5000}.0\n---\na: 1\n", "1:7"),
    ],
)
def test_syntax_errors_give_their_place(write, content, place):
    (fault,) = faults(write(content))
    assert fault.startswith(f"run.yaml:{place}: not valid YAML: ")


def test_a_syntax_error_names_the_line_where_it_all_began(write):
    (fault,) = faults(write("a: [1,\n  2\nb: 3\n"))
    assert fault.endswith(", in what began on line 1")


def test_files_that_cannot_be_read(write, tmp_path):
    assert faults("absent.yaml") == ["absent.yaml: there is no such file"]
    assert faults(str(tmp_path)) == [f"{tmp_path}: the file cannot be read: Is a directory"]
    assert faults("nul\0.yaml") == ["nul\0.yaml: the file cannot be read: embedded null byte"]
    large = write("a: 1\n" + "#" * MAX_BYTES)
    assert faults(large) == ["run.yaml: the file is larger than 1 MB, which no configuration is"]


def test_the_largest_file_is_read(write):
    assert load_yaml(write("a: 1\n" + "#" * (MAX_BYTES - 5))).data == {"a": 1}


def test_key_paths_are_one_line_of_text():
    assert dotted(("scan", "stretch", "from")) == "scan.stretch.from"
    assert dotted(("state", "points", 3, 1)) == "state.points[3][1]"
    assert dotted(("two\nlines",)) == "'two\\nlines'"


@settings(max_examples=300, deadline=None)
@given(st.text(alphabet="ab1.:-?![]{}&*#'\"|>%@\\,~ \n\t\r0xoe+/Uu\x85\u2028é\ud7ff\x07", max_size=60))
def test_any_text_is_read_or_refused_with_a_place(tmp_path_factory, text):
    path = tmp_path_factory.getbasetemp() / "any.yaml"
    path.write_bytes(text.encode())
    try:
        source, found = parse_yaml(path)
    except ConfigError as error:
        assert error.faults
        for line in error.faults:
            assert re.match(rf"{re.escape(str(path))}:[1-9]\d*:[1-9]\d*: ", line)
    else:
        assert set(source.key_marks) <= set(source.marks)
        assert all(fault.mark >= (1, 1) for fault in found)
        assert _paths(source.data, ()) == set(source.marks)


def _paths(value, path) -> set:
    children = (
        value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    )
    return {path}.union(*(_paths(child, (*path, key)) for key, child in children))


def test_the_source_is_plain_data(write):
    path = Path(write("a: 1\n"))
    assert load_yaml(path) == YamlSource(
        "run.yaml", {"a": 1}, {(): (1, 1), ("a",): (1, 4)}, {(): (1, 1), ("a",): (1, 1)}
    )
