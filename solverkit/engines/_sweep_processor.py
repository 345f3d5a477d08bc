"""Whether this processor has the instructions of the block kernels."""

from __future__ import annotations

from functools import lru_cache
from typing import Any

__all__ = ["available"]


@lru_cache(maxsize=1)
def available() -> bool:
    """Tell whether the processor has AVX-512 with the extensions that the kernels use; without them, a plain pass."""
    from llvmlite.binding import get_host_cpu_features  # noqa: PLC0415 - asked once, without loading numba

    features: Any = get_host_cpu_features()
    return all(features.get(name, False) for name in ("avx512f", "avx512bw", "avx512dq", "avx512vl"))
