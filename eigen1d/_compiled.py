"""How kernels are compiled, and what all of them share: the one module that knows numba's options.

numba dates a cached kernel by its own file alone, although it holds the code of all that it calls:
after a change in one kernel file, those above would silently run old code. The cache is therefore
kept in a folder named after what stands in all kernel files together.
"""

import hashlib
import pathlib

import numba
import numpy as np
from numba import types

LANES = 16  # trial energies side by side: four AVX2 registers, enough to hide their latency
LARGEST = 2.25  # of 2 m |V - E| h^2 in a short cell; < pi^2: at most one zero of psi in it
EPS = np.finfo(np.float64).eps
SERIES_TERMS = 22  # most terms of a power series in x
# In the place of a number of terms: a cell that is crossed in closed form, one that must be cut.
FLAT, TOO_LONG = 0, 255


_HERE = pathlib.Path(__file__).parent
SOURCES = (
    "_compiled.py", "_straight.py", "_propagators.py", "_plan.py", "_kernels.py", "_angles.py",
    "_search.py", "_ensemble.py",
    "_numbers.py",
)  # fmt: skip


def _cache_folder():
    digest = hashlib.sha256()
    for name in SOURCES:
        digest.update((_HERE / name).read_bytes())
    base = numba.config.CACHE_DIR or _HERE / "__pycache__"
    return str(pathlib.Path(base) / f"eigen1d-{digest.hexdigest()[:16]}")


_FOLDER = _cache_folder()


def kernel(function=None, signature=None, fused=False, entry=False, inline=False):
    """Compile: cached, division by zero as IEEE says, and no fast-math, which compensated sums
    would not survive; `fused` allows a product and a sum to be rounded once. A signature makes one
    version serve arrays that are read-only, strided or neither. Only an `entry` can be called from
    Python: unpacking its arguments is a large part of what compiling costs. `inline`: in loops over
    cells, where passing arrays takes as long as crossing one.
    """
    if function is None:
        return lambda function: kernel(function, signature, fused, entry, inline)
    options = {"cache": True, "error_model": "numpy", "nogil": True}
    options |= {"no_cpython_wrapper": not entry, "no_cfunc_wrapper": True, "forceinline": inline}
    if fused:
        options["fastmath"] = {"contract"}
    others, numba.config.CACHE_DIR = numba.config.CACHE_DIR, _FOLDER
    try:
        if signature is None:
            return numba.njit(**options)(function)
        return numba.njit(signature, **options)(function)
    finally:
        numba.config.CACHE_DIR = others


def given(dimensions):
    """Type of an array that a kernel only reads."""
    return types.Array(types.float64, dimensions, "A", readonly=True)


EDGE = given(1)
FLOATS, INTEGERS, COUNTS = types.float64[::1], types.int64[::1], types.uint8[::1]
# Of cells: width, V, mass, mass_per_energy, terms; where in `table` the propagator of each begins
# (-1: none; empty: none at all), `table`, and the span of energies (floor, scale) that it is for.
CELLS = types.Tuple((given(1), *[given(2)] * 3, COUNTS, INTEGERS, FLOATS, FLOATS))
