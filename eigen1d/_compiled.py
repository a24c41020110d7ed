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
LARGEST = 2.25  # of 2 m |V - E| h^2 in a series step; < pi^2: at most one zero of psi in it
EPS = np.finfo(np.float64).eps
# Most terms of a series: in the two kinds of vector lanes, and in general. FLAT and TOO_LONG stand
# in their place for a cell that is crossed in closed form, and for one that must be cut first.
STRAIGHT_TERMS, GRADED_TERMS, SERIES_TERMS = 22, 24, 96
FLAT, TOO_LONG = 0, 255


_HERE = pathlib.Path(__file__).parent
SOURCES = ("_compiled.py", "_straight.py", "_plan.py", "_kernels.py", "_search.py", "_numbers.py")


def _cache_folder():
    digest = hashlib.sha256()
    for name in SOURCES:
        digest.update((_HERE / name).read_bytes())
    base = numba.config.CACHE_DIR or _HERE / "__pycache__"
    return str(pathlib.Path(base) / f"eigen1d-{digest.hexdigest()[:16]}")


_FOLDER = _cache_folder()


def kernel(function=None, signature=None):
    """Compile: cached, division by zero as IEEE says, and no fast-math, which compensated sums
    would not survive. Kernels that Python calls have a signature, so that there is one version of
    each, whether arrays are read-only, strided or neither.
    """
    if function is None:
        return lambda function: kernel(function, signature)
    options = {"cache": True, "error_model": "numpy", "nogil": True}
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


# Of cells: width; V, mass, mass_per_energy as seen from the left; the same from the right; terms.
CELLS = types.Tuple((given(1), *[given(2)] * 6, types.Array(types.uint8, 1, "A", readonly=True)))
EDGE = given(1)
FLOATS, INTEGERS, COUNTS = types.float64[::1], types.int64[::1], types.uint8[::1]
