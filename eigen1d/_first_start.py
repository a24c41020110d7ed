"""The kernels of the shooting solver, in two processes where they are still to be compiled."""

import importlib

from ._compiled import beside


def load():
    """Import `_plan` and `_angles`, which do not import each other, so that the rest finds them."""
    finished = beside("_plan")
    importlib.import_module("._angles", __package__)
    finished()
    importlib.import_module("._plan", __package__)


load()
