"""How large a result may become: bounded when the configuration is read, and again when a file is."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from fractions import Fraction
from typing import Any

from mcgeo.runs.config_faults import Remark
from mcgeo.runs.config_types import MOST_ELECTRONS
from mcgeo.runs.sampling_config import DEFAULT_LIMIT, SamplingConfig

# In memory a result is held about three times while it is written.
LARGEST_RESULT = 8e9
# With the tables that a configuration may hold, walkers and axes.
LARGEST_FILE = 10_000_000_000

_COUNTS = ("walkers", "sweeps", "blocks")
# Numbers per block and walker beside the waves: bins and controls.
_BESIDE_WAVES = 500


def size_remarks(given: Mapping[str, Any]) -> Iterator[Remark]:
    """Refuse block means that no machine holds; nothing where the keys they follow from are not valid."""
    state, sampling = given.get("state"), given.get("sampling", {})
    if not isinstance(state, Mapping) or not isinstance(sampling, Mapping):
        return
    keys = {**SamplingConfig().model_dump(), **sampling}
    numbers = [*(keys[name] for name in (*_COUNTS, "q_max")), state.get("electrons")]
    if not all(isinstance(number, int | float) and 0 < number < 1e30 for number in numbers):
        return
    walkers, sweeps, blocks, q_max, electrons = numbers
    if electrons > MOST_ELECTRONS:
        return
    most = keys["most_sweeps"]
    if most is None and keys["target_error"] is not None:
        most = DEFAULT_LIMIT * sweeps
    if isinstance(most, int | float) and most > sweeps:
        blocks, sweeps = blocks * most / sweeps, most
    # Waves of a half-plane within q_max: A pi q^2 / (2 pi)^2 / 2 with the area A = 2 pi N / nu.
    waves = 0.25 * electrons * _inverse_filling(state) * q_max**2
    between = keys["measure_every"] if isinstance(keys["measure_every"], int) and keys["measure_every"] > 0 else 1
    components = 3.0 if state.get("kind") == "moore_read" else 1.0
    size = 8.0 * walkers * (blocks * (waves + _BESIDE_WAVES) + components * sweeps / between)
    if size > LARGEST_RESULT:
        yield Remark(
            ("sampling",),
            f"block means of {size / 1e9:.3g} GB, at most {LARGEST_RESULT / 1e9:g} work; "
            "lower walkers, blocks, sweeps or most_sweeps, or measure less often",
            at_key=True,
        )


def _inverse_filling(state: Mapping[str, Any]) -> float:
    if isinstance(state.get("exponent"), int):
        return float(state["exponent"])
    try:
        return float(1 / Fraction(state.get("filling", 1)))
    except (ValueError, TypeError, ArithmeticError):
        return 1.0
