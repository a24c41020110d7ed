"""What tests of the command line share: a table, and what it means to be refused."""

from pathlib import Path

POTENTIALS = Path(__file__).parent.parent / "potentials"
WELL = "x [nm], V [eV], m [m_e]\n0, 0.3, 0.067\n5, 0.3, 0.067\n5, 0, 0.067\n15, 0, 0.067\n"
WELL += "15, 0.3, 0.067\n20, 0.3, 0.067\n"


def refused(run, *argv):
    """Run a call that must be refused: status 2, one message, nothing printed, nothing written."""
    before = {path: path.read_bytes() for path in Path().rglob("*") if path.is_file()}
    status, out, err = run(*argv)
    assert (status, out) == (2, "")
    assert err.startswith("eigen1d: error: ") and err.endswith("\n")
    assert err.count("error:") == 1 and "Traceback" not in err
    assert {path: path.read_bytes() for path in Path().rglob("*") if path.is_file()} == before
    return err.removeprefix("eigen1d: error: ").rstrip("\n")
