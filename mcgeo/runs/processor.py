"""What the kernels are compiled for: it decides how products and sums are rounded, and so the bits of a long chain."""

from __future__ import annotations

from typing import Any

import numba
from llvmlite import binding

# Fused multiply-add rounds once where two instructions round twice; the others set the width of vectors.
_FEATURES = ("fma", "avx", "avx2", "avx512f", "neon", "sve")


def processor() -> dict[str, Any]:
    """``name`` of the processor, and those of its ``features`` that rounding may depend on."""
    features = dict(binding.get_host_cpu_features())
    # What was chosen by the environment in place of the machine's own.
    if numba.config.CPU_FEATURES is not None:
        features = {word[1:]: word.startswith("+") for word in numba.config.CPU_FEATURES.split(",") if word}
    found = [name for name in _FEATURES if features.get(name, False)]
    return {"name": numba.config.CPU_NAME or str(binding.get_host_cpu_name()), "features": found}
