"""Every Numba option of the project, and where compiled code is kept.

Numba's on-disk cache looks only at the file a kernel stands in, so an edit in a formula of another
file would go unnoticed, and its index races between CPU types. The cache folder is therefore named
by CPU, package version, Numba version and a digest of all kernel sources. It is set while a kernel is
being declared and put back afterwards, so importing skykiln leaves a host process's settings alone.

Nothing compiles at import: a kernel compiles, or is loaded from the cache, at its first call.
"""

import hashlib
import os
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path

import llvmlite.binding
import numba
from numba import config

# GNU OpenMP, Numba's usual first choice, kills a forked child whose parent has run a parallel
# kernel; the work queue is always present and survives forks. A user's own choice stays.
if "NUMBA_THREADING_LAYER" not in os.environ and config.THREADING_LAYER == "default":
    config.THREADING_LAYER = "workqueue"


def cache_directory() -> Path:
    """The folder on a local disk that holds this version's compiled kernels."""
    package = Path(__file__).parent
    sources = [p for room in ("light", "formats") for p in sorted((package / room).rglob("*.py"))]
    digest = hashlib.sha256(b"".join(p.read_bytes() for p in (Path(__file__), *sources)))
    cpu = config.CPU_NAME or llvmlite.binding.get_host_cpu_name()
    try:
        release = version("skykiln")
    except PackageNotFoundError:
        release = "uninstalled"
    root = Path(os.environ.get("XDG_CACHE_HOME") or Path.home() / ".cache")
    return root / "skykiln" / f"{release}-numba{numba.__version__}-{cpu}-{digest.hexdigest()[:12]}"


_CACHE = str(cache_directory())


def use_threads(count: int):
    """Let parallel kernels that this thread calls run on so many threads, at most those that there are."""
    numba.set_num_threads(max(1, min(count, config.NUMBA_NUM_THREADS)))


def _declare(function, **options):
    before, config.CACHE_DIR = config.CACHE_DIR, _CACHE
    try:
        return numba.njit(cache=True, nogil=True, error_model="numpy", **options)(function)
    finally:
        config.CACHE_DIR = before


def parallel(function):
    """A kernel whose outer loop is a `prange`: no sums shared between its turns, so that every
    number of threads gives the same bits."""
    return _declare(function, parallel=True, fastmath=True)


def serial(function):
    """A kernel on one thread."""
    return _declare(function, fastmath=True)


def exact(function):
    """A kernel on one thread whose NaN, infinities and rounding must stay as IEEE 754 says."""
    return _declare(function)


def formula(function):
    """A formula, which vanishes into the kernels that call it, those too that are handed whole tables:
    passing arrays to a real call costs more than most formulas do (measured: 340 ns for a tuple of
    arrays, against 16 ns of work)."""
    return numba.njit(forceinline=True, nogil=True, error_model="numpy", fastmath=True)(function)
