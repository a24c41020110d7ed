"""The command line: what it prints, what it writes, and its exit status."""

import csv
import io
import json
import os
import shutil
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from command_line import POTENTIALS, WELL, refused

from eigen1d import cli, read_profile, solve

pytestmark = pytest.mark.usefixtures("folder")


# What is printed ---------------------------------------------------------------------------------


def test_table_of_levels(run):
    """One row a level, units in the header, and in words what the list is."""
    status, out, err = run("levels", "well.csv")
    assert (status, err) == (0, "")
    title, given, _, head, *rows, _, complete, digits = out.splitlines()
    assert title == "well.csv"
    assert given == "6 rows, 3 cells; left edge open, right edge open"
    assert head.split() == (
        "n energy [eV] bracket +- [eV] cross-check [eV] <x> [nm] spread [nm]".split()
    )
    levels = solve(read_profile("well.csv"), cross_check=True)
    assert len(rows) == len(levels) == 3
    for i, row in enumerate(rows):
        n, energy, bracket, crossed, mean, spread = row.split()
        assert int(n) == i
        assert float(energy) == pytest.approx(levels.energy[i], abs=levels.budget.total[i] * 5)
        assert float(bracket) == pytest.approx(levels.budget.numeric[i], rel=0.05)
        assert float(crossed) == pytest.approx(levels.budget.method[i], rel=0.05)
        assert float(mean) == pytest.approx(10.0, abs=1e-3)
        assert float(spread) == pytest.approx(levels.spread_x[i], rel=1e-3)
    assert complete == "The list is complete: 3 bound levels; the continuum starts at 0.3 eV."
    assert digits == (
        "Energies are cut to the digits that bracket and cross-check support; --json FILE has "
        "every digit."
    )


def test_noise_is_a_column_and_cuts_no_digits(run):
    """The energies of one table stay comparable to the last digit; the noise stands beside them."""
    lines = WELL.splitlines()
    noisy = [lines[0] + ", sigma_V [meV]", *(line + ", 2.5" for line in lines[1:])]
    Path("noisy.csv").write_text("\n".join(noisy))
    plain = run("levels", "well.csv")[1].splitlines()[3:7]
    status, out, _ = run("levels", "noisy.csv", "--json", "noisy.json")
    head, *rows = out.splitlines()[3:7]
    assert status == 0
    assert head.split() == (
        "n energy [eV] bracket +- [eV] cross-check [eV] noise +- [eV] <x> [nm] spread [nm]".split()
    )
    noise = solve(read_profile("noisy.csv")).budget.noise
    found = json.loads(Path("noisy.json").read_text())["levels"]
    for i, row in enumerate(rows):
        cells = row.split()
        assert cells.pop(4) == f"{noise[i]:.1e}" and 1e-4 < noise[i] < 2.5e-3
        assert cells == plain[i + 1].split()
        assert found[i]["budget"]["noise"] == noise[i]


@pytest.mark.parametrize(
    ("value", "uncertainty", "shown"),
    [
        (0.123456789, 2e-5, "0.1234"),
        (0.123456789, 1e-4, "0.1234"),
        (0.123456789, 9.9e-5, "0.1235"),
        (-39867.6, 0.3, "-39868"),
        (-1e-17, 1e-4, "0.0000"),
        (2.777472759853e-07, 1.1e-21, "2.7774727598530e-07"),
        (2.777472759853e-07, 3e-11, "2.777e-07"),
        (8.5e12, 2e9, "8.50e+12"),
    ],
)
def test_no_digit_finer_than_the_uncertainty(value, uncertainty, shown):
    """Digits that nothing supports are read as knowledge."""
    size = 1.0 if value == -1e-17 else 0.0
    (text,) = cli._numbers(np.array([value]), np.array([uncertainty]), size)
    expected = f"{value:.4f}" if shown == "0.1234" else shown
    assert text == expected
    mantissa, _, exponent = text.partition("e")
    last = 10.0 ** (int(exponent or 0) - len(mantissa.partition(".")[2]))
    assert last >= uncertainty * (1 - 1e-12)


def test_numbers_align_at_the_decimal_point():
    """A column of energies is compared by eye."""
    cells = cli._numbers(np.array([1.25, 22.5, 333.0]), np.array([1e-3, 0.1, 2.0]))
    assert cells == ["1.250", "22.5  ", "333    "]


@pytest.mark.parametrize(
    ("options", "sentence"),
    [
        (
            ["--count", 2],
            "Listed are the lowest 2, none missed; there may be more. The continuum starts at "
            "0.3 eV.",
        ),
        (
            ["--window", -1, "2e-1"],
            "The list is complete: 2 levels between -1 and 0.2 eV; the continuum starts at 0.3 eV.",
        ),
        (
            ["--window", "0.1", "0.10000000000000002"],
            "The list is complete: no levels between 0.1 and 0.10000000000000002 eV; the continuum "
            "starts at 0.3 eV.",
        ),
        (
            ["--window", "-2e-1", "-1e-1"],
            "The list is complete: no levels between -0.2 and -0.1 eV; the continuum starts at "
            "0.3 eV.",
        ),
        (
            ["--left", "wall", "--right", "wall"],
            "Between two walls levels go on for ever; listed are the lowest 10, none missed. "
            "--count N asks for N.",
        ),
        (
            ["--left", "wall", "--right", "wall", "--window", 0, 0.1],
            "The list is complete: 1 level between 0 and 0.1 eV.",
        ),
    ],
)
def test_words_say_what_the_list_is(run, options, sentence):
    """Complete, or the lowest few of more, or a choice from infinitely many: the user must know."""
    status, out, _ = run("levels", "well.csv", "--no-cross-check", *options)
    assert status == 0 and sentence in out.splitlines()


def test_nothing_bound_is_said_in_words(run):
    """No level is an answer about the wafer, not a fault of the call."""
    Path("barrier.csv").write_text("thickness [nm], V [eV]\n5, 0.1\n5, 0.4\n5, 0.2\n")
    status, out, err = run("levels", "barrier.csv", "--json", "levels.json")
    assert (status, err) == (0, "")
    assert (
        "No level is bound: none lies below the continuum, which starts at 0.1 eV."
        in out.splitlines()
    )
    assert json.loads(Path("levels.json").read_text())["levels"] == []


def test_default_mass_is_mentioned(run):
    """A table without a mass gives free electrons: levels off by an order in a semiconductor."""
    sentence = "The mass is 1 m_e everywhere, which is assumed where a table has no column m."
    Path("free.csv").write_text("thickness [nm], V [eV]\n5, 0.4\n5, 0\n5, 0.4\n")
    assert sentence in run("levels", "free.csv", "--count", 1)[1]
    assert sentence not in run("levels", "well.csv")[1]


def test_file_without_header_and_other_readings(run):
    """The reader's options all arrive: columns, units, interpolation, edges, method."""
    bare = "".join(WELL.splitlines(keepends=True)[1:])
    Path("bare.txt").write_text(bare)
    named = ("--columns", "x,V,m", "--units", "nm,eV")
    same = run("levels", "bare.txt", *named)[1].splitlines()[3:]
    assert same == run("levels", "well.csv")[1].splitlines()[3:]
    step = run("levels", "bare.txt", *named, "--interpolation", "step", "--right", "wall")[1]
    assert "left edge open, right edge wall" in step
    assert "--columns" in refused(run, "levels", "bare.txt")


def test_title_beyond_the_terminals_encoding_is_spelled_out(run):
    """A title with a Greek letter must not crash a terminal that has none."""
    Path("greek.csv").write_text("# title: \N{GREEK SMALL LETTER MU}-well\n" + WELL)
    for encoding, title in (
        ("ascii", b"\\u03bc-well"),
        ("utf-8", "\N{GREEK SMALL LETTER MU}-well"),
    ):
        done = subprocess.run(
            [sys.executable, "-m", "eigen1d", "levels", "greek.csv", "--no-cross-check"],
            env=os.environ | {"PYTHONIOENCODING": encoding, "PYTHONPATH": str(POTENTIALS.parent)},
            capture_output=True,
        )
        assert done.returncode == 0 and done.stderr == b""
        title = title if isinstance(title, bytes) else title.encode()
        assert done.stdout.splitlines()[0] == title


def test_standard_input_is_a_file(run):
    """What the refusal of "-" advises must work."""
    command = f"{sys.executable} -m eigen1d levels /dev/stdin --no-cross-check < well.csv"
    done = subprocess.run(
        ["bash", "-c", command], env=os.environ | {"PYTHONPATH": str(POTENTIALS.parent)},
        capture_output=True, text=True,
    )  # fmt: skip
    expected = run("levels", "well.csv", "--no-cross-check")[1].splitlines()
    assert done.stdout.splitlines()[1:] == expected[1:]


def test_file_names_that_are_no_text_are_names(run):
    """Names are bytes; one in an old encoding serves as well as any, in pictures and JSON too."""
    name = os.fsdecode(b"t\xe4ler.csv")
    Path(name).write_text(WELL)
    assert run("draw", name, "--json", "levels.json", "--no-cross-check")[0] == 0
    assert Path(os.fsdecode(b"t\xe4ler.png")).exists()
    assert run("draw", name, "-o", "a.svg", "--no-cross-check")[0] == 0
    assert "t?ler.csv" in Path("a.svg").read_text()
    assert json.loads(Path("levels.json").read_text())["profile"]["source"] == name


def test_json_is_json_in_any_encoding(run):
    """A terminal without the letter of the title must not make the JSON unreadable."""
    Path("micro.csv").write_text("# title: \N{MICRO SIGN}-well\n" + WELL)
    done = subprocess.run(
        [sys.executable, "-m", "eigen1d", "levels", "micro.csv", "--no-cross-check", "--json", "-"],
        env=os.environ | {"PYTHONIOENCODING": "ascii", "PYTHONPATH": str(POTENTIALS.parent)},
        capture_output=True,
    )
    assert json.loads(done.stdout)["profile"]["title"] == "\N{MICRO SIGN}-well"


def test_windows_files_and_decimal_commas_are_read(run):
    """A byte order mark, CRLF, and decimal commas between semicolons: common, and unambiguous."""
    expected = run("levels", "well.csv", "--json", "-")[1]
    windows = b"\xef\xbb\xbf" + WELL.replace("\n", "\r\n").encode()
    commas = WELL.replace(",", ";").replace(".", ",").encode()
    for data in (windows, commas):
        Path("well.csv").write_bytes(data)
        status, out, _ = run("levels", "well.csv", "--json", "-")
        assert status == 0
        assert json.loads(out)["levels"] == json.loads(expected)["levels"]


# What is written ---------------------------------------------------------------------------------

KEYS = {
    "": ["schema", "profile", "method", "complete", "levels"],
    "profile": [
        "title", "source", "sha256", "kind", "rows", "cells", "length_unit", "energy_unit", "left",
        "right", "open_edge",
    ],
    "level": ["n", "energy", "bracket", "mean_x", "spread_x", "budget"],
    "budget": ["numeric", "table", "noise", "method", "total"],
}  # fmt: skip


def test_json_on_stdout_is_only_json(run):
    """A program reads it; the words go to stderr. The keys are a contract."""
    status, out, err = run("levels", "well.csv", "--json", "-")
    assert status == 0
    assert err.startswith("The list is complete: 3 bound levels")
    found = json.loads(out)
    assert list(found) == KEYS[""] and found["schema"] == "eigen1d/levels-1"
    assert list(found["profile"]) == KEYS["profile"]
    assert found["profile"]["source"] == "well.csv" and found["profile"]["open_edge"] == 0.3
    levels = solve(read_profile("well.csv"))
    for i, level in enumerate(found["levels"]):
        assert list(level) == KEYS["level"] and list(level["budget"]) == KEYS["budget"]
        assert level["energy"] == levels.energy[i]
        assert level["bracket"] == list(levels.bracket[i])
        assert level["budget"]["table"] is None and level["budget"]["noise"] is None
        assert level["budget"]["method"] is not None


def test_terms_that_do_not_apply_are_null(run):
    """Without a cross-check, and between walls, there is no number: null, never 0."""
    walls = ("--left", "wall", "--right", "wall", "--no-cross-check")
    assert run("levels", "well.csv", *walls, "--json", "levels.json")[0] == 0
    found = json.loads(Path("levels.json").read_text())
    assert found["profile"]["open_edge"] is None
    assert [level["budget"]["method"] for level in found["levels"]] == [None] * 10


def test_csv_of_levels_and_of_states(run):
    """Both read back as the numbers themselves; the states go on beyond the table."""
    status, *_ = run("levels", "well.csv", "--csv", "levels.csv", "--states", "states.csv")
    assert status == 0
    levels = solve(read_profile("well.csv"))
    head, *rows = csv.reader(io.StringIO(Path("levels.csv").read_text()))
    assert head == [
        "n", "energy [eV]", "bracket_low [eV]", "bracket_high [eV]", "mean_x [nm]", "spread_x [nm]",
    ]  # fmt: skip
    assert np.array_equal(np.array(rows, float)[:, 1], levels.energy)
    head, *rows = csv.reader(io.StringIO(Path("states.csv").read_text()))
    assert head == ["x [nm]", "V [eV]"] + [f"psi_{n} [nm^-1/2]" for n in range(3)]
    x, V, *psi = np.array(rows, float).T
    assert np.array_equal(V, levels.profile.V(x))
    assert x[0] < 0 and x[-1] > 20  # tails beyond the table
    inside = levels.probability(x[0], x[-1])  # a long tail is cut, so not all of 1
    assert [np.trapezoid(p**2, x) for p in psi] == pytest.approx(inside, abs=1e-6)
    assert inside.min() > 0.99


@pytest.mark.parametrize(
    ("suffix", "begin"), [("png", b"\x89PNG\r\n\x1a\n"), ("PDF", b"%PDF-"), ("svg", b"<?xml")]
)
def test_pictures(run, suffix, begin):
    """PNG, PDF and SVG, by the suffix; the same words as with `levels`."""
    status, out, err = run("draw", "well.csv", "-o", f"picture.{suffix}", "--no-cross-check")
    assert (status, err) == (0, f"wrote picture.{suffix}\n")
    assert "The list is complete: 3 bound levels" in out
    assert Path(f"picture.{suffix}").read_bytes().startswith(begin)


def test_picture_takes_the_name_of_the_table(run):
    """The shortest call draws, and says where to."""
    status, _, err = run("draw", "well.csv", "--density", "--no-cross-check")
    assert (status, err) == (0, "wrote well.png\n")
    assert Path("well.png").exists()


def test_closed_pipe_is_no_error():
    """`eigen1d levels FILE | head -1` is a fair question."""
    table = POTENTIALS / "stack_20.csv"
    command = f"{sys.executable} -m eigen1d levels {table} --no-cross-check --json - | head -c 1"
    done = subprocess.run(
        ["bash", "-o", "pipefail", "-c", command],
        env=os.environ | {"PYTHONPATH": str(POTENTIALS.parent)},
        capture_output=True, text=True,
    )  # fmt: skip
    assert (done.returncode, done.stdout) == (0, "{")
    assert "Traceback" not in done.stderr and "Broken" not in done.stderr


@pytest.mark.parametrize("words", ["levels well.csv", "--help", "levels well.csv --json -"])
@pytest.mark.parametrize(
    ("redirection", "status", "message"),
    [
        (">/dev/full", 2, "eigen1d: error: standard output cannot be written: No space left on d"),
        (">&-", 2, "eigen1d: error: standard output is closed\n  Send it where there is room"),
        ("2>/dev/full", 0, ""),
        ("2>&-", 0, ""),
    ],
)
def test_streams_that_cannot_be_written(words, redirection, status, message):
    """A full disk is no fault of the program; a script sees it by the status."""
    done = subprocess.run(
        ["bash", "-c", f"{sys.executable} -m eigen1d {words} {redirection}"],
        env=os.environ | {"PYTHONPATH": str(POTENTIALS.parent)},
        capture_output=True, text=True,
    )  # fmt: skip
    assert done.returncode == status
    assert message in done.stderr and done.stderr.count("error") == status / 2
    assert "Traceback" not in done.stderr and "Exception" not in done.stderr
    if status == 0 and "--json" in words:
        assert len(json.loads(done.stdout)["levels"]) == 3


# Checks and faults -------------------------------------------------------------------------------


def test_failed_check_is_status_3_and_writes_nothing(run, monkeypatch):
    """Scripts must be able to tell a doubtful number from a wrong call."""
    import eigen1d
    from eigen1d import CheckError

    def disagree(*_, **__):
        raise CheckError("level n = 0: 1 eV, 2 eV")

    monkeypatch.setattr(eigen1d, "solve", disagree)
    assert run("levels", "well.csv", "--json", "levels.json") == (
        3, "", "eigen1d: check failed: level n = 0: 1 eV, 2 eV\n",
    )  # fmt: skip
    assert os.listdir() == ["well.csv"]


def test_fault_of_the_program_keeps_its_traceback(run, monkeypatch):
    """Whoever mends it needs the traceback; the user must know that the table is not at fault."""
    import eigen1d

    def broken(*_, **__):
        raise ZeroDivisionError("float division by zero")

    monkeypatch.setattr(eigen1d, "solve", broken)
    status, out, err = run("levels", "well.csv", "--json", "levels.json")
    assert (status, out) == (1, "")
    assert "Traceback" in err and "ZeroDivisionError" in err
    assert "eigen1d: this is a fault of the program, not of your input." in err
    assert os.listdir() == ["well.csv"]


def test_help_and_version(run):
    """Every option that the reader knows is in the help, with the words that it takes."""
    status, out, _ = run("--version")
    assert (status, out) == (0, "eigen1d 0.1.0\n")
    status, out, _ = run("levels", "--help")
    from eigen1d._interpolation import INTERPOLATIONS
    from eigen1d._parts import EDGES
    from eigen1d.solve import METHODS

    assert status == 0
    for word in (*INTERPOLATIONS, *METHODS):
        assert word in out
    assert cli._CHOICES == {
        "method": tuple(METHODS), "interpolation": INTERPOLATIONS, "left": EDGES, "right": EDGES,
    }  # fmt: skip
    assert run("draw", "--help")[0] == 0


def test_module_is_the_command():
    """`python -m eigen1d` and the console script are one."""
    done = subprocess.run(
        [sys.executable, "-m", "eigen1d", "levels", "missing.csv"],
        env=os.environ | {"PYTHONPATH": str(POTENTIALS.parent)},
        capture_output=True, text=True,
    )  # fmt: skip
    assert done.returncode == 2 and done.stderr.startswith("eigen1d: error: missing.csv: ")


def test_copy_of_a_shipped_table_gives_the_same_levels(run):
    """What is printed depends on the table's content, not on where it lies."""
    shutil.copy(POTENTIALS / "graded_well.csv", "copy.csv")
    one = run("levels", POTENTIALS / "graded_well.csv")
    assert one[0] == 0 and one == run("levels", "copy.csv")
