"""Faults of the state: each with its place, what is allowed, and the nearest right word."""

import pytest

from mcgeo.errors import ConfigError
from mcgeo.runs.config import load_config


def faults(path: str) -> list[str]:
    with pytest.raises(ConfigError) as caught:
        load_config(path)
    return caught.value.faults


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("§scan: {}\n", "state: missing; must be a group of keys with kind one of"),
        ("§state: {}\n", "state.kind: missing; must be one of catalogue, fermi_sea, laughlin, moore_read"),
        (
            "state:§\n",
            "state: must be a group of keys with kind one of catalogue, fermi_sea, laughlin, moore_read, not null",
        ),
        ("state: §laughlin\n", "state: must be a group of keys with kind one of"),
        (
            "state: {kind: §laughlinn}\n",
            "state.kind: must be one of catalogue, fermi_sea, laughlin, moore_read, not 'laughlinn' (did you "
            "mean 'laughlin'?)",
        ),
        ("state: {kind: §3}\n", "state.kind: must be one of catalogue, fermi_sea, laughlin, moore_read, not 3"),
        ("state: {kind: §[a]}\n", "state.kind: must be one of"),
        (
            "§state: {kind: laughlin, exponent: 3}\n",
            "state.electrons: missing; must be a whole number from 2 to 10000",
        ),
        (
            "state: {kind: laughlin, exponent: 3, electrons: §1}\n",
            "state.electrons: must be a whole number from 2 to 10000, not 1",
        ),
        (
            "state: {kind: laughlin, exponent: 3, electrons: §true}\n",
            "state.electrons: must be a whole number from 2 to 10000, not true",
        ),
        (
            "state: {kind: laughlin, exponent: 3, electrons: §'10'}\n",
            "state.electrons: must be a whole number from 2 to 10000, not '10' (remove the quotes)",
        ),
        (
            "state: {kind: laughlin, exponent: 3, electrons: §10.5}\n",
            "state.electrons: must be a whole number from 2 to 10000, not 10.5",
        ),
        (
            "state: {kind: laughlin, exponent: 3, electrons: §1e300}\n",
            "state.electrons: must be a whole number from 2 to 10000, not 1e+300",
        ),
        (
            "state: {kind: laughlin, exponent: §13, electrons: 10}\n",
            "state.exponent: must be a whole number from 1 to 12, not 13",
        ),
        (
            "state: {kind: laughlin, exponent: §1/3, electrons: 10}\n",
            "state.exponent: must be a whole number from 1 to 12, not '1/3'",
        ),
        (
            "state: {kind: laughlin, exponent: 3, electrons: 10, §metrik: {}}\n",
            "state.metrik: unknown key; allowed are kind, exponent, electrons, metric, conjugate "
            "(did you mean 'metric'?)",
        ),
        (
            "state: {kind: laughlin, exponent: 3, electrons: 10, §sector: 1}\n",
            "state.sector: does not go with kind laughlin; allowed are kind, exponent, electrons, "
            "metric, conjugate",
        ),
        (
            "state: {kind: laughlin, exponent: 3, electrons: 10, metric: {stretch: §-1}}\n",
            "state.metric.stretch: must be a finite number from 0 to 5, not -1",
        ),
        (
            "state: {kind: laughlin, exponent: 3, electrons: 10, metric: {angle_degrees: §.nan}}\n",
            "state.metric.angle_degrees: must be a finite number, not .nan",
        ),
        (
            "state: {kind: laughlin, exponent: 3, electrons: 10, conjugate: §yes}\n",
            "state.conjugate: must be true or false, not 'yes'",
        ),
        (
            "state: {kind: laughlin, exponent: 3, electrons: 10, conjugate: §1}\n",
            "state.conjugate: must be true or false, not 1",
        ),
        (
            "state: {kind: laughlin, exponent: 2, electrons: 10, conjugate: §true}\n",
            "state.conjugate: a conjugate exists for fermions below filling 1 only, that is for odd "
            "exponents from 3, not for 2; must be false here",
        ),
        (
            "state: {kind: laughlin, exponent: 1, electrons: 10, conjugate: §true}\n",
            "state.conjugate: a conjugate exists",
        ),
        (
            "state: {kind: moore_read, filling: 1, electrons: 10, conjugate: §true}\n",
            "state.conjugate: a conjugate exists for fermions below filling 1 only, not for bosons; "
            "must be false here",
        ),
        (
            "state: {kind: moore_read, filling: 1/2, electrons: §7}\n",
            "state.electrons: must be an even number from 2 to 10000, not 7",
        ),
        (
            "state: {kind: moore_read, filling: §0.5, electrons: 10}\n",
            "state.filling: must be one of 1/2, 1, not 0.5",
        ),
        (
            "state: {kind: moore_read, filling: §1/0, electrons: 10}\n",
            "state.filling: must be one of 1/2, 1, not '1/0'",
        ),
        (
            "state: {kind: moore_read, filling: §true, electrons: 10}\n",
            "state.filling: must be one of 1/2, 1, not true",
        ),
        (
            "state: {kind: moore_read, filling: 1/2, electrons: 10, sector: §4}\n",
            "state.sector: must be one of all, 1, 2, 3, not 4",
        ),
        (
            "state: {kind: moore_read, filling: 1/2, electrons: 10, sector: §true}\n",
            "state.sector: must be one of all, 1, 2, 3, not true",
        ),
        (
            "state: {kind: fermi_sea, filling: §1/3, electrons: 7}\n",
            "state.filling: must be one of 1/2, 1/4, not '1/3'",
        ),
        (
            "state: {kind: fermi_sea, filling: 1/2, electrons: 7, points: §[[0, 0], [1, 0]]}\n",
            "state.points: must hold one point per particle, 7 in all, not 2",
        ),
        (
            "state: {kind: fermi_sea, filling: 1/2, electrons: 2, points: §[[1, 0], [1, 0]]}\n",
            "state.points: points must all be different, but [1, 0] is given more than once",
        ),
        (
            "state: {kind: fermi_sea, filling: 1/2, electrons: 2, points: [[1, 0], [1, §0.5]]}\n",
            "state.points[1][1]: must be a whole number, not 0.5",
        ),
        (
            "state: {kind: fermi_sea, filling: 1/2, electrons: 2, points: [[1, 0], §3]}\n",
            "state.points[1]: must be a list of 2 whole numbers, not 3",
        ),
        (
            "state: {kind: fermi_sea, filling: 1/2, electrons: 7, points: §all}\n",
            "state.points: must be a list of lists of 2 whole numbers, or null, not 'all'",
        ),
    ],
)
def test_each_fault_has_its_place_and_its_remedy(write, text, expected):
    """The sign § stands where the fault must be found and is no part of the file."""
    before, after = text.split("§")
    line, column = before.count("\n") + 1, len(before) - before.rfind("\n")
    (fault,) = faults(write(before + after))
    assert fault.startswith(f"run.yaml:{line}:{column}: {expected}")
