"""The documentation is true and whole: examples run, and everything public is described."""

import ast
import doctest
import importlib
import pathlib
import re

import pytest

PACKAGE = pathlib.Path(__file__).resolve().parent.parent / "eigen1d"
# __main__ runs the command line when it is imported.
MODULES = sorted(path.stem for path in PACKAGE.glob("*.py") if path.stem != "__main__")
# Where an example is owed: what users type. The number keeps examples from vanishing unseen.
EXAMPLES = {"units": 3, "profile": 3, "levels": 1, "solve": 1, "square_well": 1, "closed_forms": 5}


def module(name):
    # By name, because eigen1d.solve is the function.
    return importlib.import_module("eigen1d" if name == "__init__" else f"eigen1d.{name}")


@pytest.mark.parametrize("name", MODULES)
def test_examples_run(name):
    """A reader types the examples first; one that prints something else costs all trust."""
    found = doctest.testmod(module(name))
    assert found.failed == 0
    assert found.attempted >= EXAMPLES.get(name, 0)


def definitions(name):
    """(qualified name, node) of the module, its classes, and functions and methods in them."""
    tree = ast.parse((PACKAGE / f"{name}.py").read_text())
    yield name, tree
    for node in tree.body:
        if isinstance(node, ast.FunctionDef | ast.ClassDef) and not node.name.startswith("_"):
            yield f"{name}.{node.name}", node
            for part in getattr(node, "body", ()) if isinstance(node, ast.ClassDef) else ():
                if isinstance(part, ast.FunctionDef) and not part.name.startswith("_"):
                    yield f"{name}.{node.name}.{part.name}", part


PUBLIC = [pair for name in MODULES for pair in definitions(name)]
# What users call. The classes of the solvers are met through Levels alone.
INSIDE = re.compile(r"_|(shooting|finite_difference)\.[A-Z]")
FUNCTIONS = [
    (name, node)
    for name, node in PUBLIC
    if isinstance(node, ast.FunctionDef) and not INSIDE.match(name)
]


def test_the_lists_hold_what_they_should():
    """A check over an empty list passes; these names must be in it."""
    names = {name for name, _ in PUBLIC}
    assert {"profile.Profile.V_min", "levels.Levels.to_dict", "units.Units", "_cells"} <= names
    assert {name for name, _ in FUNCTIONS} >= {"solve.solve", "profile.Profile.from_rows"}
    assert len(FUNCTIONS) > 60


@pytest.mark.parametrize(("name", "node"), PUBLIC, ids=[name for name, _ in PUBLIC])
def test_everything_public_has_a_docstring(name, node):
    """Modules, classes, functions, methods and properties alike; a first line that ends."""
    text = ast.get_docstring(node)
    assert text, f"{name} has no docstring"
    first = text.split("\n\n")[0]
    assert first.rstrip()[-1] in ".:" or first.count("\n") == 0, f"{name}: {first!r}"


def raised(node):
    """Names of exceptions that the function's own statements raise."""
    for part in ast.walk(node):
        if isinstance(part, ast.Raise) and isinstance(part.exc, ast.Call):
            yield getattr(part.exc.func, "id", None)


@pytest.mark.parametrize(("name", "node"), FUNCTIONS, ids=[name for name, _ in FUNCTIONS])
def test_functions_say_what_they_take_give_and_refuse(name, node):
    """Every parameter is spoken of, and sections stand where there is something to put in them.

    A function of one obvious argument may say all in its first line, and one of a family may refer
    to another ("as in `roots`"). One with a Parameters section that gives something back has a
    Returns section too; one that raises an error that users meet says so.
    """
    text = ast.get_docstring(node)
    sections = re.findall(r"^([A-Z]\w+)\n-+$", text, flags=re.MULTILINE)
    refers = re.search(r"[Aa]s (in|for) `\w+`|as `\w+`", text)
    arguments = node.args.posonlyargs + node.args.args + node.args.kwonlyargs
    for argument in arguments:
        word = argument.arg.rstrip("_")
        if word not in ("self", "cls") and not refers:
            assert re.search(rf"\b{word}\b", text), f"{name} does not speak of {word}"
    decorators = {getattr(d, "id", None) for d in node.decorator_list}
    gives = any(isinstance(part, ast.Return) and part.value for part in ast.walk(node))
    if "Parameters" in sections and gives and "classmethod" not in decorators:
        assert {"Returns", "Yields"} & set(sections), f"{name} does not say what it returns"
    for error in {"InputError", "TableError", "CheckError"} & set(raised(node)):
        assert error in text or refers, f"{name} does not say that it raises {error}"
