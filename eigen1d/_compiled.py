"""How kernels are compiled, and what all of them share: the one module that knows numba's options.

The cache of a kernel is dated by its own file alone. After a change to one kernel file, those that
call into it would run their old code: delete eigen1d/__pycache__/*.nb* then.
"""

import numba
import numpy as np
from numba import types

LANES = 16  # trial energies side by side: four AVX2 registers, enough to hide their latency
LARGEST = 2.25  # of 2 m |V - E| h^2 in a series step; < pi^2: at most one zero of psi in it
EPS = np.finfo(np.float64).eps


def kernel(function=None, signature=None):
    """Compile: cached, division by zero as IEEE says, and no fast-math, which compensated sums
    would not survive. Kernels that Python calls have a signature, so that there is one version of
    each, whether arrays are read-only, strided or neither.
    """
    if function is None:
        return lambda function: kernel(function, signature)
    options = {"cache": True, "error_model": "numpy", "nogil": True}
    return (
        numba.njit(signature, **options)(function) if signature else numba.njit(**options)(function)
    )


def _given(dimensions, contiguous=False):
    """Type of an array that a kernel only reads."""
    layout = "C" if contiguous else "A"
    return types.Array(types.float64, dimensions, layout, readonly=True)


CELLS = types.Tuple((_given(1), _given(2), _given(2), _given(2)))
EDGE = _given(1)
FLOATS, INTEGERS = types.float64[::1], types.int64[::1]
