"""Every bound level of a one-dimensional potential, each in a two-sided bracket.

from eigen1d import read_profile, solve
levels = solve(read_profile("potentials/graded_well.csv"), cross_check=True)
print(levels.energy, levels.bracket)
"""

import importlib
import sys
import types

__version__ = "0.1.0"

# The public names and where they live. They are imported when first asked for, so that
# `import eigen1d` and `eigen1d --help` load neither numba nor scipy nor matplotlib.
_HOME = {
    "CheckError": "errors",
    "Ensemble": "ensembles",
    "InputError": "errors",
    "Levels": "levels",
    "Profile": "profile",
    "TableError": "errors",
    "Units": "units",
    "read_profile": "tables",
    "solve": "solve",
    "solve_many": "ensembles",
}
# Modules that are public as a whole: levels in closed form.
_MODULES = ("closed_forms", "square_well")
__all__ = [*_HOME, *_MODULES]


def __getattr__(name):
    if name in _MODULES:
        return importlib.import_module(f".{name}", __name__)  # which binds the name here
    if name not in _HOME:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    value = getattr(importlib.import_module(f".{_HOME[name]}", __name__), name)
    globals()[name] = value
    return value


def __dir__():
    return sorted(set(globals()) | set(__all__))


class _Package(types.ModuleType):
    # Importing eigen1d/solve.py binds the name `solve` here to that module, at a time that depends
    # on who imports what first. The public name is the function, always.
    def __setattr__(self, name, value):
        if name == "solve" and isinstance(value, types.ModuleType):
            value = value.solve
        super().__setattr__(name, value)


sys.modules[__name__].__class__ = _Package
