"""How the engine's functions are compiled, and where the compiled code is kept.

numba's disk cache looks only at the file of the function it compiles: an edit in a callee's file goes unnoticed
and a stale kernel would render. So the cache folder is named by a digest of the kernel's source and of everything of
ours it imports, in the user's own cache folder; numba itself keys on processor, version and signature.

Kernels divide by numpy's rules (1/0 is infinite, never an exception) and are compiled without fast-math, so that
no operation is fused or reordered and every machine rounds alike.
"""

from __future__ import annotations

import functools
import hashlib
import os
import re
import tempfile
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numba
from numba.core import config

ENGINE_FOLDER = Path(__file__).resolve().parent
PACKAGE_FOLDER = ENGINE_FOLDER.parent
_IMPORT = re.compile(r"^ *from (kickrender[\w.]*) import (\([^)]*\)|[^\n#]+)", re.MULTILINE)


def kernel(function: Callable[..., Any]) -> Callable[..., Any]:
    """Compile `function` to machine code on first use, kept on disk under the digest of the kernel sources.

    It must allocate nothing. References to its arrays are not counted then: every count is an atomic operation that
    waits for all stores before it.
    """
    return _compiled(function)


def inner_kernel(function: Callable[..., Any]) -> Callable[..., Any]:
    """Like `kernel`, for functions that only other kernels call: each caller gets a copy of the code.

    A call would put every field of every array it hands over on the stack, some three hundred words for a program.
    """
    return _compiled(function, door=False, copied=True)


def shared_kernel(function: Callable[..., Any]) -> Callable[..., Any]:
    """Like `inner_kernel`, for what is called seldom and from several places: one piece of code for all of them."""
    return _compiled(function, door=False)


def allocating_kernel(function: Callable[..., Any]) -> Callable[..., Any]:
    """Like `kernel`, for functions that make arrays of their own; not for innermost loops."""
    return _compiled(function, allocates=True)


def _compiled(
    function: Callable[..., Any], *, door: bool = True, copied: bool = False, allocates: bool = False
) -> Callable[..., Any]:
    folder = cache_folder(Path(function.__code__.co_filename))
    before = config.CACHE_DIR
    config.CACHE_DIR = str(folder)  # numba reads it when the function is decorated
    try:
        return numba.njit(
            cache=True,
            nogil=True,
            error_model="numpy",
            no_cpython_wrapper=not door,
            no_cfunc_wrapper=True,
            _nrt=allocates,
            forceinline=copied,
        )(function)
    finally:
        config.CACHE_DIR = before


@functools.cache
def cache_folder(source: Path) -> Path:
    """The folder of compiled code that belongs to `source` and to every file of ours it imports, directly or not."""
    digest = hashlib.sha256()
    for path in sorted(_with_imports(source.resolve())):
        digest.update(path.name.encode() + b"\0" + path.read_bytes() + b"\0")
    return _cache_root() / digest.hexdigest()[:16]


def _with_imports(source: Path) -> set[Path]:
    """`source` and the files of this package it imports, found by reading their import lines."""
    found, left = set(), [source]
    while left:
        path = left.pop()
        if path in found:
            continue
        found.add(path)
        for module, names in _IMPORT.findall(path.read_text(encoding="utf-8")):
            base = PACKAGE_FOLDER.parent.joinpath(*module.split("."))
            for name in re.findall(r"\w+", names):
                inside = base / name  # `from package import module` brings the module, not the package
                choices = (
                    inside.with_suffix(".py"),
                    inside / "__init__.py",
                    base.with_suffix(".py"),
                    base / "__init__.py",
                )
                left += [file for file in choices if file.is_file()][:1]
    return found


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
