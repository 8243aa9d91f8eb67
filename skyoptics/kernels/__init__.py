"""Compiled kernels: numpy and numba only, one algorithm a file, no words, no classes.

Numba's file cache looks at the caller's file alone and keeps an old result when a callee in another file was edited. So
the cache folder is named after a hash of all kernel files, which also serves read-only installs. This has to happen
before numba is imported, hence here and not in a module.
"""

from __future__ import annotations

import os
import sys
from hashlib import sha256
from pathlib import Path


def kernel_hash() -> str:
    """Return a hash of all kernel sources, 16 hex digits: part of every trace key."""
    digest = sha256()
    for path in sorted(Path(__file__).parent.glob("*.py")):
        digest.update(path.name.encode())
        digest.update(path.read_bytes())
    return digest.hexdigest()[:16]


def cache_folder() -> Path:
    """Return the folder where compiled kernels of this version are kept."""
    from platformdirs import user_cache_path

    base = os.environ.get("SKYOPTICS_CACHE")
    root = Path(base) if base else user_cache_path("skyoptics", appauthor=False)
    return root / "kernels" / KERNEL_HASH


KERNEL_HASH = kernel_hash()
if "NUMBA_CACHE_DIR" not in os.environ:
    os.environ["NUMBA_CACHE_DIR"] = str(cache_folder())
    if "numba" in sys.modules:
        import numba

        setattr(numba.config, "CACHE_DIR", os.environ["NUMBA_CACHE_DIR"])  # noqa: B010 (numba declares it nowhere)
