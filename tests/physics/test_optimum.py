"""Many problems put to one liquid: the same numbers whatever was asked before."""

from __future__ import annotations

from typing import Any

import pytest

from mcgeo.runs.config import config_from_resolved
from mcgeo.runs.liquid import Liquid
from mcgeo.runs.scan import SharedAnswers, optimum, optimum_summary, scan

_TILT = {"confinement_ratio": 3.0}


def problem_keys(**keys: Any) -> dict[str, Any]:
    config = config_from_resolved({"state": {"kind": "laughlin", "exponent": 3, "electrons": 37}, "problem": keys})
    return dict(config.model_dump(mode="json", by_alias=True)["problem"])


PROBLEMS = [
    problem_keys(mass={"ratio": 4.0}, level_mixing=1.0),
    problem_keys(mass={"ratio": 2.0, "angle_degrees": 30}, level_mixing=2.0),
    problem_keys(mass={"ratio": 2.0}, level=1),
    problem_keys(mass={"ratio": 2.0}, interaction={"kind": "pseudopotentials", "values": {"1": 1.0, "3": 0.3}}),
    problem_keys(mass={"ratio": 2.0}, tilt={"angle_degrees": 20, **_TILT}),
    problem_keys(mass={"ratio": 1.0}, tilt={"angle_degrees": 40, "direction_degrees": 30, **_TILT}),
    problem_keys(mass={"ratio": 2.0}, tilt={"angle_degrees": 20, "confinement_ratio": 5.0}),
    problem_keys(mass={"ratio": 2.0}, variation="rigid", level_mixing=1.0),
    problem_keys(mass={"ratio": 2.0}, variation="rigid", level_mixing=2.0),
    problem_keys(mass={"ratio": 2.0}, variation="two_metric", level_mixing=2.0),
]


def test_order_does_not_matter_to_the_last_bit(third: Liquid) -> None:
    alone = [repr(optimum_summary(optimum(third.occupations, keys))) for keys in PROBLEMS]
    for order in (range(len(PROBLEMS)), reversed(range(len(PROBLEMS)))):
        shared = SharedAnswers()
        for index in order:
            assert repr(optimum_summary(optimum(third.occupations, PROBLEMS[index], shared))) == alone[index]
    assert len(set(alone)) == len(alone)


@pytest.mark.parametrize("index", [0, 7])
def test_a_scan_has_the_same_optimum(third: Liquid, index: int) -> None:
    line = {"angle_degrees": None, "stretch": {"from": 0.0, "to": 0.5, "points": 3}}
    summary = optimum_summary(scan(third, PROBLEMS[index], line))
    assert "susceptibility" in summary
    del summary["susceptibility"]
    assert repr(summary) == repr(optimum_summary(optimum(third, PROBLEMS[index])))
