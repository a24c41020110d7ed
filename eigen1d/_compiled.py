"""How kernels are compiled, and what all of them share: the one module that knows numba's options.

numba dates a cached kernel by its own file alone, although it holds the code of all that it calls:
after a change in one kernel file, those above would silently run old code. The cache is therefore
kept in a folder named after what stands in all kernel files together.
"""

import contextlib
import hashlib
import os
import pathlib
import subprocess
import sys
import tempfile

import llvmlite.binding
import numba
import numpy as np
from llvmlite import ir
from numba import extending, types
from numba.core import cgutils

LANES = 16  # trial energies side by side: four AVX2 registers, enough to hide their latency
LARGEST = 2.25  # of 2 m |V - E| h^2 in a short cell; < pi^2: at most one zero of psi in it
EPS = np.finfo(np.float64).eps
SERIES_TERMS = 22  # most terms of a power series in x
# In the place of a number of terms: a cell that is crossed in closed form, one that must be cut.
FLAT, TOO_LONG = 0, 255


_HERE = pathlib.Path(__file__).parent
SOURCES = (
    "_compiled.py", "_straight.py", "_propagators.py", "_plan.py", "_kernels.py", "_angles.py",
    "_search.py", "_ensemble.py", "_numbers.py",
)  # fmt: skip


_DIGEST = hashlib.sha256(b"".join((_HERE / name).read_bytes() for name in SOURCES)).hexdigest()[:16]


def _folder():
    """Where compiled kernels are kept, or None, and whether there were none.

    Beside the sources; if that cannot be written to, in the user's cache; else nowhere.
    """
    for place in (numba.config.CACHE_DIR or _HERE / "__pycache__", os.path.expanduser("~/.cache")):
        folder = pathlib.Path(place) / f"eigen1d-{_DIGEST}"
        empty = not folder.exists()
        try:
            folder.mkdir(parents=True, exist_ok=True)
            with tempfile.TemporaryFile(dir=folder):
                return str(folder), empty
        except OSError:
            continue
    return None, False


_FOLDER, FIRST_START = _folder()


def kernel(function=None, signature=None, fused=False, entry=False, inline=False):
    """Compile: cached, division by zero as IEEE says, and no fast-math, which compensated sums
    would not survive; `fused` allows a product and a sum to be rounded once. A signature makes one
    version serve arrays that are read-only, strided or neither. Only an `entry` can be called from
    Python: unpacking its arguments is a large part of what compiling costs. `inline`: in loops over
    cells, where passing arrays takes as long as crossing one.
    """
    if function is None:
        return lambda function: kernel(function, signature, fused, entry, inline)
    options = {"cache": _FOLDER is not None, "error_model": "numpy", "nogil": True}
    options |= {"no_cpython_wrapper": not entry, "no_cfunc_wrapper": True, "forceinline": inline}
    if fused:
        options["fastmath"] = {"contract"}
    with _cache():
        if signature is None:
            return numba.njit(**options)(function)
        return numba.njit(signature, **options)(function)


@contextlib.contextmanager
def _cache():
    """Let numba write to the folder of these sources."""
    others = numba.config.CACHE_DIR
    numba.config.CACHE_DIR = _FOLDER or others
    try:
        yield
    finally:
        numba.config.CACHE_DIR = others


def beside(module):
    """Compile a module of kernels in another process, if this is the first start.

    It takes some ten seconds and numba compiles in one thread. Returns a function that waits for
    the end; what has then been compiled is read from the cache.
    """
    if not FIRST_START or not sys.executable:
        return lambda: None
    place = os.pathsep.join([str(_HERE.parent), os.environ.get("PYTHONPATH", "")])
    return subprocess.Popen(
        [sys.executable, "-c", f"import eigen1d.{module}"],
        env=os.environ | {"PYTHONPATH": place},
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
    ).wait


def apart(signature):
    """Compile for kernels that call it by its address, with arguments that fit `signature`.

    Numba optimises a kernel together with all that it calls, and so sweeps once for each kernel
    above them. What is behind an address is compiled once, which takes a quarter off the first
    start. The name that the address goes by is bound anew at each start.
    """

    def compiled(function):
        with _cache():
            code = numba.cfunc(signature, cache=_FOLDER is not None, error_model="numpy")(function)
        name = f"eigen1d_{function.__name__}_{_DIGEST}"
        llvmlite.binding.add_symbol(name, code.address)

        @extending.intrinsic
        def call(context, *given):
            def generate(context, builder, given, arguments):
                values = [
                    context.cast(builder, value, kind, wanted)
                    for value, kind, wanted in zip(
                        cgutils.unpack_tuple(builder, arguments[0]), given.args[0], signature.args,
                        strict=True,
                    )
                ]  # fmt: skip
                kinds = [context.get_value_type(kind) for kind in signature.args]
                kind = ir.FunctionType(context.get_value_type(signature.return_type), kinds)
                target = cgutils.get_or_insert_function(builder.module, kind, name)
                return builder.call(target, values)

            return signature.return_type(types.StarArgTuple(given)), generate

        call.py_func = function
        return call

    return compiled


def given(dimensions):
    """Type of an array that a kernel only reads."""
    return types.Array(types.float64, dimensions, "A", readonly=True)


EDGE = given(1)
FLOATS, INTEGERS, COUNTS = types.float64[::1], types.int64[::1], types.uint8[::1]
# Of cells: width, V, mass, mass_per_energy, terms; where in `table` the propagator of each begins
# (-1: none; empty: none at all), `table`, and the span of energies (floor, scale) that it is for;
# the least energy that a cell is right for, as lower ones do not reach it (empty: right for all).
CELLS = types.Tuple((given(1), *[given(2)] * 3, COUNTS, INTEGERS, FLOATS, FLOATS, FLOATS))


# Arrays are made by these alone: np.empty compiles anew for each way in which a shape is written.


@kernel(signature=FLOATS(types.int64))
def floats(size):
    """Numbers, not set."""
    return np.empty(size)


@kernel(signature=types.float64[:, ::1](types.int64, types.int64))
def grid(rows, columns):
    """Numbers in rows, not set."""
    return np.empty((rows, columns))


@kernel(signature=types.float64[:, :, ::1](types.int64, types.int64, types.int64))
def block(planes, rows, columns):
    """Numbers in planes of rows, not set."""
    return np.empty((planes, rows, columns))


@kernel(signature=INTEGERS(types.int64))
def integers(size):
    """Integers, not set."""
    return np.empty(size, np.int64)


@kernel(signature=COUNTS(types.int64))
def counts(size):
    """Small integers, not set."""
    return np.empty(size, np.uint8)
