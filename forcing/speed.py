"""Decide once, before any kernel module is imported, whether kernels are compiled.

A single day is cheapest as plain Python; many columns are cheapest compiled. A kernel is a module-level
function of floats, tuples, named tuples and one-dimensional arrays (lists when plain) that uses ``math`` only.

The compiled cache folder carries a hash of all sources of both packages, because the compiler's own cache does
not notice an edit in another file than the one of the cached function.
"""

from __future__ import annotations

import os
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar

F = TypeVar("F", bound=Callable[..., Any])

COMPILED = os.environ.get("DAYLAYER_COMPILED", "0") == "1"


def _source_hash() -> str:
    import hashlib

    digest = hashlib.sha256(sys.version.encode())
    root = Path(__file__).resolve().parent
    for folder in (root, root.parent / "slab"):
        for path in sorted(folder.rglob("*.py")):
            digest.update(path.read_bytes())
    return digest.hexdigest()[:16]


def _cache_folder() -> Path:
    base = os.environ.get("XDG_CACHE_HOME") or str(Path.home() / ".cache")
    return Path(base) / "daylayer" / _source_hash()


if COMPILED:
    os.environ.setdefault("NUMBA_CACHE_DIR", str(_cache_folder()))
    import numba

    def kernel(function: F) -> F:
        """Compile a kernel (cached on disk, without the interpreter lock)."""
        compiled: Any = numba.njit(cache=True, nogil=True, error_model="numpy")(function)
        return compiled  # type: ignore[no-any-return]

else:

    def kernel(function: F) -> F:
        """Leave a kernel as plain Python."""
        return function
