"""Strategies: configurations at random, whole and damaged, and real ones with other values and other bytes."""

import copy
import json
import math
import re
from pathlib import Path

import yaml
from hypothesis import assume
from hypothesis import strategies as st

angles = st.floats(-720, 720)
metrics = st.fixed_dictionaries({}, optional={"stretch": st.floats(0, 5), "angle_degrees": angles})
positive = st.floats(1e-6, 1e6)


@st.composite
def states(draw, disk):
    kind = draw(st.sampled_from(["laughlin", "moore_read"] + ([] if disk else ["fermi_sea"])))
    state = {"kind": kind, "electrons": 2 * draw(st.integers(1, 30)), "metric": draw(metrics)}
    fermions = draw(st.booleans())
    if kind == "laughlin":
        state["exponent"] = draw(st.sampled_from([3, 5, 11] if fermions else [1, 2, 12]))
    elif kind == "moore_read":
        state["filling"] = "1/2" if fermions else draw(st.sampled_from([1, "1"]))
        if not disk:
            state["sector"] = draw(st.sampled_from(["all", 1, 2, 3]))
    else:
        state["filling"] = draw(st.sampled_from(["1/2", "1/4"]))
        if draw(st.booleans()):
            points = st.lists(
                st.tuples(st.integers(-9, 9), st.integers(-9, 9)), min_size=2, max_size=9, unique=True
            )
            state["points"] = [list(point) for point in draw(points)]
            state["electrons"] = len(state["points"])
    state["conjugate"] = (fermions or kind == "fermi_sea") and not disk and draw(st.booleans())
    return state


@st.composite
def samplings(draw):
    sampling = draw(
        st.fixed_dictionaries(
            {"sweeps": st.integers(2, 2 * 10**5)},
            optional={
                "walkers": st.integers(1, 16),
                "equilibration": st.integers(0, 100),
                "step": st.none() | positive,
                "seed": st.none() | st.integers(0, 2**128),
                "threads": st.none() | st.integers(1, 64),
                "checkpoint_seconds": st.floats(0, 1e4),
                "q_max": st.floats(4, 12),
            },
        )
    )
    sampling["blocks"] = draw(st.integers(2, min(100, sampling["sweeps"])))
    sampling["measure_every"] = draw(st.none() | st.integers(1, sampling["sweeps"] // sampling["blocks"]))
    if draw(st.booleans()):
        sampling["target_error"] = draw(positive)
        sampling["target_quantity"] = draw(st.sampled_from(["energy", None]))
        sampling["blocks"] = min(sampling["blocks"], 32)
    return sampling


@st.composite
def tensors(draw):
    xx, yy, correlation = draw(positive), draw(positive), draw(st.floats(-0.9, 0.9))
    xy = correlation * (xx * yy) ** 0.5
    return [[xx, xy], [xy, yy]]


masses = st.one_of(
    st.fixed_dictionaries({"ratio": positive}, optional={"angle_degrees": angles}),
    st.fixed_dictionaries({"along_axes": st.lists(positive, min_size=2, max_size=2)}),
    st.fixed_dictionaries({"tensor": tensors()}),
)
plain_interactions = st.one_of(
    st.just({"kind": "coulomb"}),
    st.fixed_dictionaries({"kind": st.just("gaussian"), "range": positive}),
    st.fixed_dictionaries({"kind": st.just("power_law"), "exponent": st.floats(0.1, 1.9)}),
    st.fixed_dictionaries(
        {
            "kind": st.just("pseudopotentials"),
            "values": st.dictionaries(st.integers(0, 15).map(str), st.floats(-9, 9), min_size=1),
        },
        optional={"metric": metrics},
    ),
)
interactions = st.recursive(
    plain_interactions,
    lambda inner: st.fixed_dictionaries(
        {
            "kind": st.just("sum"),
            "terms": st.lists(
                st.fixed_dictionaries({"weight": st.floats(-9, 9), "interaction": inner}), min_size=1, max_size=3
            ),
        }
    ),
    max_leaves=4,
)
problems = st.fixed_dictionaries(
    {}, optional={"mass": masses, "interaction": interactions, "level": st.integers(0, 1)}
)


@st.composite
def scans(draw):
    start = draw(st.floats(-6, 5))
    stretch = {
        "from": start,
        "to": draw(st.floats(start, 6, exclude_min=True)),
        "points": draw(st.integers(3, 99)),
    }
    return {"stretch": stretch, "angle_degrees": draw(st.none() | angles)}


@st.composite
def configurations(draw):
    disk = draw(st.booleans())
    data = {"state": draw(states(disk)), "sampling": draw(samplings())}
    if disk:
        data["geometry"] = {"kind": "disk"}
    elif draw(st.booleans()):
        cells = st.fixed_dictionaries({"tau": st.tuples(st.floats(-3, 3), positive).map(list)})
        data["cell"] = draw(cells | st.just({"shape": "square"}))
    for name, group in (("problem", problems), ("scan", scans())):
        if draw(st.booleans()):
            data[name] = draw(group)
    return data


junk = st.one_of(
    st.none(),
    st.booleans(),
    st.integers(-3, 3),
    st.integers(),
    st.floats(),
    st.text(max_size=5),
    st.sampled_from(["1", "1e3", "1/3", "all", "disk", "laughlin", "\ud800", "a\nb"]),
    st.lists(st.integers(0, 2), max_size=3),
    st.dictionaries(
        st.sampled_from(["kind", "tau", "ratio", "laughlin", "x"]), st.integers(0, 2), max_size=2
    ),
)


def nodes(value):
    children = (
        value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    )
    for key, child in children:
        yield value, key
        yield from nodes(child)


@st.composite
def damaged(draw):
    data = copy.deepcopy(draw(configurations()))
    for _ in range(draw(st.integers(1, 4))):
        places = list(nodes(data))
        if not places:
            break
        parent, key = draw(st.sampled_from(places))
        action = draw(st.sampled_from(["replace", "remove", "add"]))
        if action == "replace":
            parent[key] = draw(junk)
        elif action == "remove":
            del parent[key]
        elif isinstance(parent, dict):
            parent[
                draw(st.sampled_from(["kind", "tau", "ratio", "sector", "laughlin", "from_", "a b", ""]))
            ] = draw(junk)
    return data


# Those of single runs; a sweep may rightly take long to check.
REAL = {
    path.name: path.read_bytes()
    for path in sorted((Path(__file__).parents[2] / "configs").glob("*.yaml"))
    if b"\nsweep:" not in path.read_bytes()
}
EXTREMES = [
    0, -1, 1, 2, 3, 7, 10**4, 10**6, 10**9, 2**63, 2**64, 10**18, 10**400, -(10**18), 0.0, -0.0, 1e-320, 1e-300, 1e-12,
    1e12, 1e300, 1.7e308, math.inf, -math.inf, math.nan, True, None, "", "k" * 2000, "1/3", "0/0", "1/0", "*",
    "../x.csv", "/dev/zero", "run.yaml", [], {}, [[]], [0.0, 1e300], [1e-300, 1e-300], {"kind": "sum", "terms": []},
    {"kind": "table", "file": "x.csv"}, {"stretch": 5.0, "angle_degrees": 1e300}, "laughlin", "disk", "coulomb",
]  # fmt: skip
ADDED = ["kind", "metric", "file", "target_error", "points", "sweep", "width_nm", "x" * 99]
@st.composite
def real_with_other_values(draw):
    """A configuration that comes with the program, with values replaced, removed, added, swapped or doubled."""
    data = yaml.safe_load(REAL[draw(st.sampled_from(sorted(REAL)))])
    for _ in range(draw(st.integers(1, 3))):
        places = list(nodes(data))
        if not places:
            break
        parent, key = draw(st.sampled_from(places))
        action = draw(st.sampled_from(["extreme", "extreme", "junk", "remove", "add", "swap", "nest"]))
        if action == "remove":
            del parent[key]
        elif action == "add" and isinstance(parent, dict):
            parent[draw(st.sampled_from(ADDED))] = copy.deepcopy(draw(st.sampled_from(EXTREMES)))
        elif action == "swap":
            other, name = draw(st.sampled_from(places))
            parent[key], other[name] = copy.deepcopy(other[name]), copy.deepcopy(parent[key])
        elif action == "nest":
            parent[key] = {key: copy.deepcopy(parent[key])} if isinstance(key, str) else [parent[key]]
        else:
            parent[key] = copy.deepcopy(draw(st.sampled_from(EXTREMES) if action == "extreme" else junk))
    text = json.dumps(data).replace("-Infinity", "-.inf").replace("Infinity", ".inf").replace("NaN", ".nan")
    return text.encode()


TOKENS = [
    b"\t", b"\n", b"\r", b"\0", b"\xff", b"\xef\xbb\xbf", b"\xe2\x80\xa8", b":", b": ", b"- ", b"? ", b"{", b"}", b"[",
    b"]", b",", b"#", b"&a ", b"*a", b"!!int ", b"|", b">", b"'", b'"', b"%", b"---\n", b"...\n", b"<<: ", b"9", b"e9",
    b"-", b".", b"~", b"\\", b"  ",
]  # fmt: skip


SWEEP = b"""\
state: {kind: laughlin, exponent: 3, electrons: 8}
problem: {mass: {ratio: 2.0}, interaction: {kind: square_well, width: 1.0}}
sweep:
  axes:
    - {key: problem.mass.ratio, from: 1, to: 4, points: 3, spacing: logarithmic}
    - {key: problem.interaction.width, values: [0.5, 1, 2]}
    - together:
        - {key: state.exponent, values: [3, 5]}
        - {key: state.electrons, values: [8, 6]}
  exclude:
    - {problem.mass.ratio: 4}
"""


@st.composite
def other_bytes(draw, texts):
    """The bytes of a text, cut, doubled, exchanged and grown at any place."""
    text = draw(st.sampled_from(texts))
    for _ in range(draw(st.integers(1, 4))):
        start = draw(st.integers(0, len(text)))
        end = min(len(text), start + draw(st.sampled_from([0, 0, 1, 1, 2, 8, 60, 10_000])))
        doubled = st.just(2 * text[start:end])
        put = draw(st.one_of(st.just(b""), st.sampled_from(TOKENS), doubled, st.binary(max_size=3)))
        text = text[:start] + put + text[end:]
    # A sweep of very many points is none that may not be made.
    assume(not re.search(rb"points: *[0-9]{3}", text) or b"sweep" not in text)
    return text
