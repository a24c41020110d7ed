"""How the command line refuses: status 2, one message, nothing printed and nothing written."""

import os
from pathlib import Path

import pytest
from command_line import refused

pytestmark = pytest.mark.usefixtures("folder")


@pytest.mark.parametrize(
    ("make", "first"),
    [
        (None, "missing.csv: "),
        ("folder", "missing.csv: "),
        (b"", "missing.csv: "),
        (b"x [nm], V [eV]\n", "missing.csv, line 1: "),
        (b"x [nm], V [eV]\n0, 1\n", "missing.csv, line 2: "),
        (b"\x89PNG\r\n\x1a\n\x00\x00\x00\rIHDR", "missing.csv"),
        ("x [nm], V [eV]\n0, 1\n1, 2\n# \N{MICRO SIGN}\n".encode("latin-1"), "missing.csv"),
        (b"x [nm], V\n0, 1\n1, 2\n", "missing.csv, line 1, column 2"),
        (b"x [nm], V [volt]\n0, 1\n1, 2\n", "missing.csv, line 1, column 2"),
        (b"x [nm], V [nm]\n0, 1\n1, 2\n", "missing.csv, line 1, column 2"),
        (b"x [nm], x [nm], V [eV]\n0, 0, 1\n1, 1, 2\n", "missing.csv, line 1, column 2"),
        (b"x [nm], V [eV], w [nm]\n0, 1, 1\n1, 2, 1\n", "missing.csv, line 1, column 3"),
        (b"x [nm], V [eV]\n0, 1\n1\n", "missing.csv, line 3, column 2"),
        (b"x [nm], V [eV]\n0, 1\n1, O.2\n", "missing.csv, line 3, column 2 (V [eV]): expected"),
        (b"x [nm], V [eV]\n0, 1\n1, nan\n", "missing.csv, line 3, column 2"),
        (b"x [nm], V [eV]\n0, inf\n1, 1\n", "missing.csv, line 2, column 2"),
        (b"x [nm], V [eV]\n0, 1\n2, 1\n1, 1\n", "missing.csv, line 4, column 1"),
        (b"x [nm], V [eV]\n0, 1\n0, 2\n0, 3\n1, 1\n", "missing.csv, line 4, column 1"),
        (b"x [nm], V [eV], m [m_e]\n0, 1, 0\n1, 1, 1\n", "missing.csv, line 2, column 3"),
        (b"thickness [nm], V [eV]\n-1, 0\n", "missing.csv, line 2, column 1"),
        (b"x [nm], V [eV], sigma_V [eV]\n0, 1, 1\n1, 1, -1\n", "missing.csv, line 3, column 3"),
        (b"x [nm], V [eV]\n0,0, 0,3\n5,0, 0,1\n", "missing.csv, line 2, column 3"),
    ],
    ids=[
        "missing file", "directory", "empty", "header only", "one row", "binary",
        "wrong encoding", "missing unit", "unknown unit", "unit of the wrong kind",
        "duplicated column", "unknown column", "ragged row", "text in a number", "nan", "inf",
        "x not ascending", "three rows at one x", "zero mass", "negative thickness",
        "negative sigma", "decimal commas between commas",
    ],
)  # fmt: skip
@pytest.mark.parametrize("command", ["levels", "draw"])
def test_bad_tables_are_refused(run, make, first, command):
    """One message with the place, status 2, nothing written; the texts are in test_tables.py."""
    if make == "folder":
        os.mkdir("missing.csv")
    elif make is not None:
        Path("missing.csv").write_bytes(make)
    message = refused(run, command, "missing.csv", "--json", "levels.json")
    assert message.startswith(first)


@pytest.mark.parametrize(
    ("argv", "message"),
    [
        (
            ["levels", "well.csv", "--count", "4"],
            "well.csv: --count 4 asks for more levels than exist: 3 bound levels\n"
            "  Write --count 3, or leave --count out for all there are.",
        ),
        (
            ["levels", "well.csv", "--window", "0.3", "0.1"],
            "window must ascend: its first energy lies below its second; found 0.3, 0.1",
        ),
        (
            ["levels", "well.csv", "--count", "2", "--window", "0", "1"],
            "--count and --window exclude each other\n"
            "  Leave one out: --window lists all levels in it.",
        ),
        (
            ["levels", "well.csv", "--window", "0.1", "inf"],
            "both ends of the window must be finite; found 0.1, inf",
        ),
        (
            ["levels", "well.csv", "--window", "0.10000000000000002", "0.1"],
            "window must ascend: its first energy lies below its second; found "
            "0.10000000000000002, 0.1",
        ),
        (
            ["levels", "well.csv", "--count", "0"],
            "argument --count: expected a whole number from 1, found '0'\n"
            "  eigen1d levels --help shows what can be written.",
        ),
        (
            ["levels", "well.csv", "--count", "two"],
            "argument --count: expected a whole number from 1, found 'two'\n"
            "  eigen1d levels --help shows what can be written.",
        ),
        (
            ["levels", "well.csv", "--window", "0", "x"],
            "argument --window: expected a number, found 'x'\n"
            "  eigen1d levels --help shows what can be written.",
        ),
        (
            ["levels", "well.csv", "--method", "guessing"],
            "argument --method: expected shooting or finite-difference, found 'guessing'\n"
            "  eigen1d levels --help shows what can be written.",
        ),
        (
            ["levels", "well.csv", "--interpolation", "cubic"],
            "argument --interpolation: expected linear, step, smooth or monotone, found 'cubic'\n"
            "  eigen1d levels --help shows what can be written.",
        ),
        (
            ["levels", "well.csv", "--left", "shut"],
            "argument --left: expected open or wall, found 'shut'\n"
            "  eigen1d levels --help shows what can be written.",
        ),
        (
            ["levels", "well.csv", "--columns", "x,V,m"],
            "--columns x,V,m without units\n  Write for example --columns x,V,m and --units nm,eV.",
        ),
        (
            ["levels", "well.csv", "--units", "nm,eV"],
            "--units nm,eV without columns\n  Write for example --columns x,V,m and --units nm,eV.",
        ),
        (
            ["levels", "well.csv", "--columns", "x, V", "--units", "nm"],
            "--units nm: expected a length and an energy, found 1 of them\n"
            "  Write for example --columns x,V,m and --units nm,eV.",
        ),
        (
            ["levels", "well.csv", "--columns", "x, U", "--units", "nm,eV"],
            "--columns 'x, U', column 2: unknown column 'U'\n"
            "  Write V.\n"
            "  Columns are x, V, m, sigma_V, alpha; for layers thickness, V, m, V_end, m_end, "
            "alpha, layer.",
        ),
        (
            ["levels", "-"],
            "-: standard input is read under its name\n  Write /dev/stdin instead.",
        ),
        (
            ["levels", "well.csv", "--json", ""],
            "--json: expected the name of a file, found an empty one",
        ),
        (
            ["levels", "well.csv", "--json", "nowhere/levels.json"],
            "nowhere/levels.json: there is no folder nowhere\n"
            "  Make the folder first, or name one that exists.",
        ),
        (
            ["levels", "well.csv", "--csv", "./well.csv"],
            "./well.csv: would overwrite the input well.csv\n  Name another file for the output.",
        ),
        (
            ["levels", "well.csv", "--csv", "a.csv", "--states", "./a.csv"],
            "--csv and --states both name ./a.csv; each needs a file of its own",
        ),
        (
            ["levels", "well.csv", "--csv", "-"],
            "--csv -: only --json can go to stdout; name a file",
        ),
        (
            ["draw", "well.csv", "-o", "well.gif"],
            "well.gif: pictures are not written as .gif\n  End the name in .png, .pdf or .svg.",
        ),
        (
            ["draw", "well.csv", "-o", "well"],
            "well: a picture needs a suffix\n  End the name in .png, .pdf or .svg.",
        ),
        (
            ["draw", "well.csv", "-o", "a.png", "--json", "nowhere/a.json"],
            "nowhere/a.json: there is no folder nowhere\n"
            "  Make the folder first, or name one that exists.",
        ),
    ],
    ids=lambda value: " ".join(value) if isinstance(value, list) else "",
)
def test_bad_calls_are_refused(run, argv, message):
    """What is wrong, what was found, what to write; and no output is half there."""
    assert refused(run, *argv) == message


@pytest.mark.parametrize("argv", [[], ["solve", "well.csv"], ["levels"], ["levels", "--wat", "x"]])
def test_calls_that_make_no_sense_name_the_help(run, argv):
    """argparse chooses the words; the shape and the status are ours."""
    assert refused(run, *argv).endswith("--help shows what can be written.")


def test_count_where_nothing_is_bound(run):
    """More levels asked for than exist, also if none exists."""
    Path("barrier.csv").write_text("thickness [nm], V [eV]\n5, 0.1\n5, 0.4\n5, 0.2\n")
    assert refused(run, "levels", "barrier.csv", "--count", "1") == (
        "barrier.csv: --count 1 asks for more levels than exist: no bound levels\n"
        "  Leave --count out for all there are."
    )


def test_write_protected_output_is_refused_before_anything_is_computed(run, monkeypatch):
    """A run of an hour must not end with the news that its result has no place."""
    os.mkdir("locked")
    access = os.access
    # A superuser may write anywhere, so the answer of a locked folder is given by hand.
    monkeypatch.setattr(os, "access", lambda p, mode: "locked" not in str(p) and access(p, mode))
    message = refused(run, "levels", "well.csv", "--csv", "a.csv", "--json", "locked/b.json")
    assert message == (
        "locked/b.json: cannot be written: no permission to write there\n"
        "  Name a file in a folder of yours."
    )


def test_output_over_the_input_through_a_link_is_refused(run):
    """Another name of the input is still the input."""
    os.symlink("well.csv", "link.csv")
    assert "would overwrite the input" in refused(run, "levels", "well.csv", "--csv", "link.csv")
