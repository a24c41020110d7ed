"""The shape of the project: floors, top level, style of the public surface."""

import ast
import pathlib

import pytest

ROOT = pathlib.Path(__file__).resolve().parent.parent
PACKAGE = ROOT / "eigen1d"

# A file imports only from floors below its own. A new file is placed here first.
FLOORS = [
    {"errors", "_cells", "_compiled"},
    {"units", "_files", "_checks", "_functions", "_interpolation"}
    | {"_straight", "_propagators", "_table_faults", "_numbers"},
    {"_parts", "_plan", "_table_text", "_table_header"},
    {"profile", "_kernels"},
    {"_angles", "_quadrature", "_difference_forms", "tables", "square_well", "closed_forms"},
    {"_search", "_first_start", "levels"},
    {"_ensemble", "shooting", "finite_difference"},
    {"solve", "ensembles"},
    {"draw"},
    {"cli"},
    {"__init__", "__main__"},
]
FLOOR = {name: floor for floor, names in enumerate(FLOORS) for name in names}


def package_imports(path):
    """Names of eigen1d modules that a file imports anywhere, functions included."""
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.ImportFrom):
            if node.level == 1 and node.module is None:
                yield from (alias.name for alias in node.names)
            elif node.level == 1:
                yield node.module.split(".")[0]
            elif node.level == 0 and (node.module or "").split(".")[0] == "eigen1d":
                yield (node.module.split(".") + ["__init__"])[1]
        elif isinstance(node, ast.Import):
            for alias in node.names:
                if alias.name.split(".")[0] == "eigen1d":
                    yield (alias.name.split(".") + ["__init__"])[1]


@pytest.mark.parametrize("path", sorted(PACKAGE.glob("*.py")), ids=lambda path: path.stem)
def test_imports_go_down_the_floors(path):
    """An import up or sideways ties two ideas into one; it is refused here, not argued about."""
    assert path.stem in FLOOR, f"{path.name} has no floor yet: place it in FLOORS"
    for name in package_imports(path):
        if path.stem in ("__init__", "__main__"):
            continue
        assert FLOOR[name] < FLOOR[path.stem], f"{path.name} imports {name}, not from below"


def test_every_floor_names_files_that_exist():
    """A floor plan that names files long gone would let new ones in by accident."""
    assert set(FLOOR) == {path.stem for path in PACKAGE.glob("*.py")}


def test_the_oracle_and_the_solvers_do_not_know_each_other():
    """The analytic square well judges the solvers, so it must share nothing with them."""
    solvers = {"shooting", "finite_difference", "_compiled", "_straight", "_kernels", "_search"}
    for name in ("square_well", "closed_forms"):
        assert not solvers & set(package_imports(PACKAGE / f"{name}.py"))
    for name in solvers:
        imported = set(package_imports(PACKAGE / f"{name}.py"))
        assert not {"square_well", "closed_forms"} & imported


def test_the_two_methods_share_no_numerics():
    """The second opinion is one only if it shares nothing but the profile with the first."""
    theirs = set(package_imports(PACKAGE / "finite_difference.py"))
    assert not theirs & {"shooting", "_compiled", "_straight", "_kernels", "_search"}
