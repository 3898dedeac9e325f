"""How the engine's functions are compiled, and where the compiled code is kept.

numba's disk cache looks only at the file of the function it compiles: an edit in a callee's file goes unnoticed
and a stale kernel would render. So the cache folder is named by a digest of every kernel source, in the user's
own cache folder; numba itself keys on processor, version and signature.

Kernels divide by numpy's rules (1/0 is infinite, never an exception) and are compiled without fast-math, so that
no operation is fused or reordered and every machine rounds alike.
"""

from __future__ import annotations

import functools
import hashlib
import os
import tempfile
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numba
from numba.core import config

ENGINE_FOLDER = Path(__file__).parent


def kernel(function: Callable[..., Any]) -> Callable[..., Any]:
    """Compile `function` to machine code on first use, kept on disk under the digest of the kernel sources."""
    folder = cache_folder(Path(function.__code__.co_filename))
    before = config.CACHE_DIR
    config.CACHE_DIR = str(folder)  # numba reads it when the function is decorated
    try:
        return numba.njit(cache=True, nogil=True, error_model="numpy")(function)
    finally:
        config.CACHE_DIR = before


@functools.cache
def cache_folder(source: Path) -> Path:
    """The folder of compiled code that belongs to the engine's sources and to `source`."""
    digest = hashlib.sha256()
    for path in sorted({*ENGINE_FOLDER.rglob("*.py"), source}):
        digest.update(path.name.encode() + b"\0" + path.read_bytes() + b"\0")
    return _cache_root() / digest.hexdigest()[:16]


@functools.cache
def _cache_root() -> Path:
    base = os.environ.get("KICKRENDER_CACHE") or os.environ.get("XDG_CACHE_HOME") or Path.home() / ".cache"
    root = Path(base) / "kickrender"
    try:
        root.mkdir(parents=True, exist_ok=True)
        if os.access(root, os.W_OK):
            return root
    except OSError:
        pass
    return Path(tempfile.gettempdir()) / f"kickrender-{os.getuid() if hasattr(os, 'getuid') else 'user'}"


def is_compiled() -> bool:
    """Whether this version's kernels are on disk already; if not, the first solve compiles for a while."""
    return any(cache_folder(ENGINE_FOLDER / "stepper.py").rglob("stepper.solve-*.nbc"))
