"""Numbers for people: values with their errors in the last digits."""

from __future__ import annotations

import math

from mcgeo.estimate.statistics import Estimate

# Smaller errors are rounding: symmetry fixes such a number.
_EXACT_BELOW = 1e-10
_EXACT_DIGITS = 6


def value_with_error(estimate: Estimate) -> str:
    """``1.723(4)``: the error in units of the last digit, with two digits when it starts with 1.

    Errors of 1 and above keep their point, ``13.1(1.4)``. An error below 1e-10 leaves the plain number; an infinite or
    undefined one gives ``value(?)``.
    """
    value, error = estimate.value, estimate.error
    if not math.isfinite(error):
        return f"{value:.3g}(?)"
    if error < _EXACT_BELOW:
        # Adding zero turns -0.0 into 0.0.
        return f"{round(value, _EXACT_DIGITS) + 0.0:.{_EXACT_DIGITS}g}"
    exponent = math.floor(math.log10(error))
    digits = 2 if error / 10.0**exponent < 2.0 else 1
    decimals = max(digits - 1 - exponent, 0)
    shown = f"{error:.{decimals}f}"
    if error < 1.0:
        shown = str(round(error * 10**decimals))
    return f"{round(value, decimals) + 0.0:.{decimals}f}({shown})"


def degrees_with_error(radians: Estimate) -> str:
    """``17.2(3)°`` of an angle in radians, to a hundredth of a degree at most where it is exact."""
    return f"{value_with_error(Estimate(round(math.degrees(radians.value), 2), math.degrees(radians.error)))}°"
