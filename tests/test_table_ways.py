"""The ways through a table file agree: from its bytes, at once from its text, and line by line."""

import subprocess
import sys

import numpy as np
import pytest
from faults_of_heads import GOOD, ROWS
from faults_of_rows import ROW_FAULTS
from same_tables import SAME

from eigen1d import tables
from eigen1d.errors import TableError
from eigen1d.tables import read_profile


@pytest.fixture(autouse=True)
def no_size_is_small(monkeypatch):
    """Every file may be read from its bytes."""
    monkeypatch.setattr(tables, "_LARGE", 0)


def from_bytes(path, named=None):
    large = tables._large_table(path, named)
    return None if large is None else large[1]


def table_of(path, named=None):
    return tables.split(tables.text_source(path, tables.read_bytes(path)), named, tables.SETTINGS)


def by_every_way(path):
    table = table_of(path)
    return from_bytes(path), tables._numbers_at_once(table), tables._numbers_by_line(table)


@pytest.mark.parametrize("variant", SAME)
def test_clean_file_is_read_alike_by_every_way(variant, write):
    """A fault must not change the numbers around it, nor the size of the file any."""
    raw, at_once, by_line = by_every_way(write(SAME[variant]))
    assert by_line.shape == (2, 3)
    # Blank lines of blanks are read by line alone; lines must end alike in bytes and text; and a
    # comment with a colon might set something.
    for values, others in ((at_once, {"comments everywhere"}), (raw, {"CR", "late colons"})):
        assert (values is None) == (variant in others)
        assert values is None or np.array_equal(values, by_line)


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize(
    ("delimiter", "decimal"), [*zip(",;\t ", "....", strict=True), *zip(";\t ", ",,,", strict=True)]
)
def test_random_numbers_are_read_alike_by_every_way(seed, delimiter, decimal, write):
    """Every float that is written comes back to the last bit, whichever way."""
    rng = np.random.default_rng(seed)
    values = rng.standard_normal((50, 3)) * 10.0 ** rng.integers(-300, 300, (50, 3))
    rows = [delimiter.join(repr(float(v)) for v in row).replace(".", decimal) for row in values]
    header = ROWS.strip().replace(", ", delimiter)
    for found in by_every_way(write("\n".join([header, *rows]))):
        assert np.array_equal(found, values)


NUMBERS = "1 +1 -1 1. .5 -.5e-3 1e5 1E+05 00012 1e-400 1e400 nan -NaN inf +Infinity".split()
NO_NUMBERS = (
    "1_000 0x10 1e 1e+ e5 . + - -- +-1 1.2.3 1d5 1f 1j True None 1/2 1..2 1e5.0 infinit nan(1) "
    "1'000 \N{VULGAR FRACTION ONE HALF} \N{ARABIC-INDIC DIGIT ONE} \N{MINUS SIGN}1 1:2"
).split(" ")


@pytest.mark.parametrize("token", NUMBERS + NO_NUMBERS)
def test_every_way_agrees_on_what_a_number_is(token, write):
    """If one way took text that the other refuses, a fault elsewhere would change the verdict."""
    path = write(f"x [nm], V [eV]\n0, 1\n1, {token}\n")
    table = table_of(path)
    raw, at_once = from_bytes(path), tables._numbers_at_once(table)
    if token in NUMBERS:
        assert np.array_equal(at_once, by_line := tables._numbers_by_line(table), equal_nan=True)
        assert (raw is None) == ("n" in token.lower())  # no word is a number of a profile
        assert raw is None or np.array_equal(raw, by_line)
    else:
        assert at_once is raw is None
        with pytest.raises(TableError, match="expected a number"):
            tables._numbers_by_line(table)


def test_faulty_files_are_read_by_line(write):
    """The fast ways must refuse all that the careful way would explain."""
    refused = 0
    for fault in ROW_FAULTS:
        if "expected a number" in fault.text or "values, found" in fault.text:
            path = write(fault.content)
            named = tables.named_columns(
                fault.arguments.get("columns"), fault.arguments.get("units")
            )
            assert tables._numbers_at_once(table_of(path, named)) is None, fault.id
            assert from_bytes(path, named) is None, fault.id
            refused += 1
    assert refused > 20


@pytest.mark.parametrize("seed", range(4))
def test_damaged_file_is_read_alike_or_refused(seed, write):
    """Whatever bytes arrive: a profile or a TableError, and never two answers."""
    rng = np.random.default_rng(seed)
    whole = [c if isinstance(c, bytes) else c.encode() for c in SAME.values()]
    scraps = [bytes([b]) for b in b'\n\r\t ,;.#[]:=01-+eE"\x00\xc3\xa0\x0c'] + [
        b"",
        b"nan",
        b"1e999",
        b"\n# left: wall",
    ]
    outcomes = {"read": 0, "refused": 0, "from bytes": 0}
    for _ in range(250):
        data = bytearray(whole[rng.integers(len(whole))])
        for _ in range(rng.integers(1, 3)):
            at = rng.integers(len(data) + 1)
            data[at : at + rng.integers(3)] = scraps[rng.integers(len(scraps))]
        path = write(bytes(data))
        try:
            tables._check_values(*tables._table(path, None)[:2])
        except TableError as error:
            assert str(error).startswith("well.csv")
            with pytest.raises(TableError) as again:
                read_profile(path)
            assert str(again.value) == str(error)
            outcomes["refused"] += 1
        else:
            raw, at_once, by_line = by_every_way(path)
            assert at_once is None or np.array_equal(at_once, by_line)
            assert raw is None or np.array_equal(raw, by_line)
            outcomes["read"] += 1
            outcomes["from bytes"] += raw is not None
    assert min(outcomes.values()) >= 10, outcomes  # else the damage tests one outcome alone


def test_clean_file_is_never_read_by_line(write, monkeypatch):
    """Line by line a million rows take 5 s, at once 0.6 s: a clean file must take the fast way."""
    monkeypatch.setattr(tables, "_LARGE", 1 << 40)
    monkeypatch.setattr(tables, "_numbers_by_line", None)
    for variant in set(SAME) - {"comments everywhere"}:
        assert read_profile(write(SAME[variant])).row_count > 1


def test_clean_large_file_never_becomes_text(write, monkeypatch):
    """The lines of ten million rows are a gigabyte of text, and take ten times as long."""
    monkeypatch.setattr(tables, "_table", None)
    monkeypatch.setattr(tables, "_HEAD", 200)
    rows = "".join(f"{x}, 0.5, 0.1\n" for x in range(100))
    profile = read_profile(write("# title: long\n" + ROWS + rows))
    assert profile.rows.x.tolist() == list(range(100))
    assert profile.title == "long"


@pytest.mark.parametrize("bad", [("9, 1, 1", "x no less"), ("200, 1, -1", "a positive mass")])
def test_a_wrong_number_in_a_large_file_is_shown_in_its_place(bad, write, monkeypatch):
    """The numbers were read from bytes; the message still quotes the line."""
    monkeypatch.setattr(tables, "_HEAD", 200)
    rows = "".join(f"{x}, 0.5, 0.1\n\n" for x in range(100))
    row, what = bad
    with pytest.raises(TableError, match=f"^well.csv, line 202, .*: expected {what}") as caught:
        read_profile(write(ROWS + rows + row + "\n"))
    assert f"\n    202 | {row}\n" in str(caught.value)


def test_a_file_that_changes_while_it_is_read_is_not_quoted(write):
    """Numbers of one file must not be explained with the lines of another."""
    path = write(ROWS + GOOD + "1, 1, 1\n")
    table, values, _ = tables._large_table(path, None)
    write(ROWS + GOOD)
    with pytest.raises(TableError, match="^well.csv: the file was changed while it was read\n"):
        tables._check_values(table, values)


def test_many_faults_are_listed_in_bounded_space(write):
    """A column of a hundred thousand faults is one message, not a flood."""
    with pytest.raises(TableError) as caught:
        read_profile(write(ROWS + "".join(f"{x}, ?, 1\n" for x in range(100_000))))
    assert "lines 3, 4, 5, 6, 7 and 99994 more lines" in str(caught.value)
    assert len(str(caught.value)) < 500


def test_reading_imports_neither_numba_nor_matplotlib():
    """A table that is wrong should be refused before anything slow is loaded."""
    code = "import sys, eigen1d.tables; print({'numba', 'matplotlib', 'scipy'} & set(sys.modules))"
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert run.stdout.strip() == "set()"
