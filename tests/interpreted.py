"""Kernels run by the Python interpreter: what the compiler made of them can then be compared."""

from types import FunctionType


def interpreted(module, **instead):
    """Return the names of a module of kernels, none of them compiled, all calling each other.

    Parameters
    ----------
    module : module
        Its compiled functions, and those of other modules that they call, become plain Python.
    instead : callable
        Functions to use in the place of those of that name.

    Returns
    -------
    dict
        The names of the module and what they stand for.
    """
    spaces = {}

    def plain_space(names):
        if names["__name__"] in spaces:
            return spaces[names["__name__"]]
        space = spaces[names["__name__"]] = dict(names)
        for name, value in names.items():
            if hasattr(value, "py_func"):
                space[name] = plain(value.py_func)
        space.update(instead)
        return space

    def plain(function):
        space = plain_space(function.__globals__)
        return FunctionType(
            function.__code__, space, function.__name__, function.__defaults__, function.__closure__
        )

    return plain_space(vars(module))
