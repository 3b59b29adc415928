"""The one place that decides how kernels are compiled and where the result is kept.

The compiler's file cache does not notice a change in a callee that lives in another file, so the
cache folder carries a stamp over all kernel sources and the compiler's version: a stale kernel
can never be loaded. It lies in the user's cache folder, because an installed package may be
read-only.
"""

import hashlib
import os
import shutil
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar

import llvmlite
import numba
from numba.core.compiler import Compiler

# The compiler declares no types for its settings and half of its options.
_compiler: Any = numba

_F = TypeVar("_F", bound=Callable[..., Any])


def _stamp() -> str:
    """Digest of all kernel sources and of the versions that turn them into machine code."""
    digest = hashlib.sha256()
    for name in (numba.__version__, llvmlite.__version__, sys.version):
        digest.update(name.encode())
    for source in sorted(Path(__file__).parent.glob("*.py")):
        digest.update(source.name.encode())
        digest.update(source.read_bytes())
    return digest.hexdigest()[:16]


def _user_cache() -> Path:
    """Return the user's cache folder by the conventions of the operating system."""
    if sys.platform == "win32":
        return Path(os.environ.get("LOCALAPPDATA", Path.home() / "AppData" / "Local"))
    if sys.platform == "darwin":
        return Path.home() / "Library" / "Caches"
    return Path(os.environ.get("XDG_CACHE_HOME", Path.home() / ".cache"))


def _writable(folder: Path) -> bool:
    try:
        folder.mkdir(parents=True, exist_ok=True)
        with tempfile.TemporaryFile(dir=folder):
            return True
    except OSError:
        return False


def _cache_folder() -> Path:
    """Folder of this source's compiled kernels; a new private one where nothing can be kept."""
    chosen = _user_cache() / "outcouple" / f"kernels-{_stamp()}"
    return chosen if _writable(chosen) else Path(tempfile.mkdtemp(prefix="outcouple-kernels-"))


CACHE_FOLDER = _cache_folder()
_compiler.config.CACHE_DIR = str(CACHE_FOLDER)

# Folders of earlier sources that nobody has used for so long are cleared away.
_OUTDATED_S = 30 * 86400.0


def cache_is_warm(job: str = "budget") -> bool:
    """Tell whether the kernels of a job, as they stand, already lie compiled in the cache."""
    return bool(_compiler.config.DISABLE_JIT) or (CACHE_FOLDER / f"{job}-complete").exists()


def mark_cache_warm(job: str = "budget") -> None:
    """Note that every kernel of a job has been compiled into the cache."""
    if cache_is_warm(job):
        return
    (CACHE_FOLDER / f"{job}-complete").touch()
    for old in CACHE_FOLDER.parent.glob("kernels-*"):
        if old != CACHE_FOLDER and time.time() - old.stat().st_mtime > _OUTDATED_S:
            shutil.rmtree(old, ignore_errors=True)


# No division check: it would stop the loops from vectorizing, and every divisor is guarded.
# No fastmath: it gains nothing here and breaks the tests for NaN.
_OPTIONS = {"nogil": True, "error_model": "numpy"}
# Only kernels call helpers: these need no cache entry and no entry from Python.
_HELPER = {**_OPTIONS, "no_cpython_wrapper": True, "no_cfunc_wrapper": True}
# Whose arrays outlive a helper need not count its views of them, which costs as much as a loop.
_BORROWING = {**_HELPER, "_nrt": False}


def kernel(function: _F) -> _F:
    """Compile a kernel that Python calls: cached on disk, releasing the interpreter lock."""
    compiled: _F = _compiler.njit(cache=True, **_OPTIONS)(function)
    return compiled


def inline(function: _F) -> _F:
    """Compile a helper that only kernels call."""
    compiled: _F = _compiler.njit(**_HELPER)(function)
    return compiled


def borrowing(function: _F) -> _F:
    """Compile a helper as `inline` does that makes no arrays and returns no view of one."""
    compiled: _F = _compiler.njit(**_BORROWING)(function)
    return compiled


def scalar(function: _F) -> _F:
    """Compile a helper of single numbers as `borrowing` does, always in place: loops vectorize."""
    compiled: _F = _compiler.njit(forceinline=True, **_BORROWING)(function)
    return compiled


def reduction(function: _F) -> _F:
    """Compile a helper as `scalar` does whose sums may be taken in any order, as SIMD needs."""
    compiled: _F = _compiler.njit(forceinline=True, fastmath={"reassoc"}, **_BORROWING)(function)
    return compiled


class _Apart(Compiler):
    """Tells the compiler's back end that arrays given to a function do not overlap."""

    def define_pipelines(self) -> Any:
        self.state.flags.noalias = True
        pipelines: Any = super()
        return pipelines.define_pipelines()


def rowwise(function: _F) -> _F:
    """Compile a helper as `borrowing` does whose arrays never overlap: loops vectorize unchecked.

    No array that it writes may share memory with another of its arrays.
    """
    compiled: _F = _compiler.njit(pipeline_class=_Apart, **_BORROWING)(function)
    return compiled
