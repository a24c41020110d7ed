"""Reading tables: what works, and what every fault says."""

import hashlib
import re

import numpy as np
import pytest
from faults_of_heads import GOOD, HEAD_FAULTS, LAYERS, ROWS
from faults_of_rows import ROW_FAULTS
from same_tables import SAME

from eigen1d import tables
from eigen1d.errors import InputError, TableError
from eigen1d.tables import read_profile
from eigen1d.units import Units

FAULTS = HEAD_FAULTS + ROW_FAULTS


@pytest.fixture(params=[tables._LARGE, 0], ids=["as it is", "as if large"])
def size(request, monkeypatch):
    """What works on a small file must work on a large one, and its faults read the same."""
    monkeypatch.setattr(tables, "_LARGE", request.param)


# Faults -----------------------------------------------------------------------------------------


@pytest.mark.usefixtures("size")
@pytest.mark.parametrize("fault", FAULTS, ids=lambda fault: fault.id)
def test_fault_is_explained_in_full(fault, write):
    """The text is all a user has to go by, and the attributes all a program has."""
    with pytest.raises(TableError) as caught:
        read_profile(write(fault.content), **fault.arguments)
    assert str(caught.value) == fault.text
    error = caught.value
    assert error.path == "well.csv"
    assert (error.line, error.column, error.name, error.found) == fault.place


def test_fault_table_is_sound():
    """Two cases under one name, or a text that is not about its place, would hide a fault."""
    assert len({fault.id for fault in FAULTS}) == len(FAULTS)
    for fault in FAULTS:
        first = fault.text.split("\n")[0]
        line, column, name, _ = fault.place
        assert first.startswith("well.csv")
        assert (f", line {line}" in first) == (line is not None)
        assert (f", column {column}" in first) == (column is not None)
        assert column is None or not name or f"({name})" in first


@pytest.mark.parametrize("fault", FAULTS, ids=lambda fault: fault.id)
def test_marks_stand_below_what_was_found(fault):
    """A mark below something else sends the user to the wrong place."""
    lines = fault.text.split("\n")
    marks = [k for k, line in enumerate(lines) if "^" in line and not line.strip(" |^")]
    assert len(marks) == (fault.place[0] is not None)
    for k in marks:
        first, last = lines[k].index("^"), lines[k].rindex("^")
        above = lines[k - 1][first : last + 1]
        if "values, found" in lines[0]:  # the mark is on what is too much, or where it is missing
            before = lines[k - 1][:first]
            assert (
                fault.place[3].endswith(above) if above.strip() else before.endswith(fault.place[3])
            )
        elif quote := re.search("found.* '([^']{1,32})'$", lines[0]):
            assert above in (quote[1], str(fault.place[2]))


def test_empty_cells_at_the_end_of_rows_are_named(write):
    """A spreadsheet writes as many separators as its widest row has; two are no other fault."""
    with pytest.raises(TableError, match="expected 3 values, found 5") as caught:
        read_profile(write(ROWS.replace(",", ";") + "0,0;0,280;0,092;;\n5;0;0,067;;\n"))
    assert "\n  Remove the separator at the end of the row; it stands" in str(caught.value)


@pytest.mark.parametrize(
    ("header", "found", "meant"),
    [
        ("x [Angstroms], V [eV]", "Angstroms", "x [angstrom]"),
        ("x [A], V [eV]", "A", "x [angstrom]"),
        ("x [\N{LATIN SMALL LETTER A WITH RING ABOVE}], V [eV]", "\u00e5", "x [angstrom]"),
        ("x [NM], V [eV]", "NM", "x [nm]"),
        ("x [nm], V [EV]", "EV", "V [eV]"),
        ("x [nm], V [Hartrees]", "Hartrees", "V [hartree]"),
        ("x [nm], V [cm\N{SUPERSCRIPT MINUS}\N{SUPERSCRIPT ONE}]", "cm\u207b\u00b9", "V [cm^-1]"),
        ("x [nm], V (meV)", "V (meV)", "V [meV]"),
        ("x [nm], Ec / K", "Ec / K", "V [K]"),
        ("z [um], V [eV]", "z", "x [um]"),
        # Another unit, so none is proposed: to write it instead would be other physics.
        ("x [pm], V [eV]", "pm", None),
        ("x [mm], V [eV]", "mm", None),
        ("x [nm], V [A]", "A", None),
        ("x [nm], V [MeV]", "MeV", None),
        ("x [nm], V [mV]", "mV", None),
        ("x [nm], V [kcal/mol]", "kcal/mol", None),
        ("x [nm], V (kcal/mol)", "V (kcal/mol)", None),
        ("x [nm], V [eV], m [kg]", "kg", None),
    ],
)
def test_a_unit_is_proposed_only_where_it_is_the_one_that_was_written(header, found, meant, write):
    """A user does as the message says; one unit for another makes levels wrong by any factor."""
    with pytest.raises(TableError) as caught:
        read_profile(write(header + "\n0, 1\n5, 1\n"))
    first, *_, text = str(caught.value).split("^\n")
    assert f"found '{found}'" in first or f"column '{found}'" in first
    proposed = re.findall(r"Write (\w+ \[.*?\])", text)
    assert proposed == ([meant] if meant else [])
    assert text.startswith("  Convert the numbers to ") or meant or "(" in found


@pytest.mark.parametrize(
    ("spelling", "unit"),
    [
        ("\N{LATIN CAPITAL LETTER A WITH RING ABOVE}", "angstrom"),
        ("\N{ANGSTROM SIGN}", "angstrom"),
        ("A\N{COMBINING RING ABOVE}", "angstrom"),
        ("\N{MICRO SIGN}m", "um"),
        ("\N{GREEK SMALL LETTER MU}m", "um"),
    ],
)
def test_letters_of_physics_are_read_as_the_units_they_are(spelling, unit, write):
    """They are how everybody writes these units, and mean nothing else."""
    assert read_profile(write(f"x [{spelling}], V [eV]\n0, 1\n5, 1\n")).units == Units(unit, "eV")
    bare = read_profile(write("0, 1\n5, 1\n"), columns="x,V", units=f"{spelling},eV")
    assert bare.units == Units(unit, "eV")


@pytest.mark.parametrize(
    ("path", "text"),
    [
        ("wel.csv", "wel.csv: there is no such file\n  Did you mean well.csv?"),
        ("q", "q: there is no such file\n  Check the name and the folder."),
        ("no/q", "no/q: there is no such file\n  Check the name and the folder."),
        (".", ".: is a folder, a file was expected\n  Name a file in it, such as ./well.csv."),
        (
            "well.csv/q",
            "well.csv/q: cannot be read: Not a directory\n"
            "  Name a file that exists and that you may read.",
        ),
        (
            "a\0b",
            "a\N{REPLACEMENT CHARACTER}b: cannot be read: embedded null byte\n"
            "  Name a file that exists and that you may read.",
        ),
    ],
)
def test_path_that_is_no_file_is_explained(path, text, write):
    """The commonest fault of all is the name of the file."""
    write(ROWS + GOOD)
    with pytest.raises(TableError) as caught:
        read_profile(path)
    assert str(caught.value) == text
    assert caught.value.path == path


@pytest.mark.parametrize(
    ("arguments", "text"),
    [
        ({"left": "opne"}, "unknown left 'opne'; write one of: open, wall"),
        (
            {"interpolation": "cubic"},
            "unknown interpolation 'cubic'; write one of: linear, step, smooth, monotone",
        ),
        (
            {"units": "nm,eV"},
            "units='nm,eV' without columns\n"
            '  Write for example columns="x,V,m" and units="nm,eV".',
        ),
        (
            {"columns": "x,V,m"},
            "columns='x,V,m' without units\n"
            '  Write for example columns="x,V,m" and units="nm,eV".',
        ),
        (
            {"columns": "x,V,m", "units": "nm"},
            "units='nm': expected a length and an energy, found 1 of them\n"
            '  Write for example columns="x,V,m" and units="nm,eV".',
        ),
        (
            {"columns": "x,V,m", "units": "nm,ev"},
            "unknown unit of energy 'ev'; write one of: eV, meV, J, hartree, cm^-1, K",
        ),
        (
            {"columns": "x,U,m", "units": "nm,eV"},
            "columns='x,U,m', column 2: unknown column 'U'\n"
            "  Write V.\n"
            "  Columns are x, V, m, sigma_V, alpha; "
            "for layers thickness, V, m, V_end, m_end, alpha, layer.",
        ),
        (
            {"columns": "x,m", "units": "nm,eV"},
            "columns='x,m': there is no column V\n  Add a column V [eV], the potential energy.",
        ),
    ],
)
def test_argument_that_cannot_be_used_is_explained(arguments, text, write):
    """A fault of the call is not blamed on the file."""
    path = write(GOOD)
    with pytest.raises(InputError) as caught:
        read_profile(path, **arguments)
    assert str(caught.value) == text
    assert not isinstance(caught.value, TableError)


def test_fault_of_the_profile_names_the_file(write, monkeypatch):
    """What the reader does not foresee still comes with the name of the file."""

    def from_rows(**_):
        raise InputError("V is too steep")

    monkeypatch.setattr(tables.Profile, "from_rows", from_rows)
    with pytest.raises(TableError, match="^well.csv: V is too steep\n"):
        read_profile(write(ROWS + GOOD))


@pytest.mark.usefixtures("size")
# What works -------------------------------------------------------------------------------------

@pytest.mark.parametrize("variant", SAME)
def test_same_table_in_any_dress(variant, write):
    """Spreadsheets of every country and scripts of every age write the same numbers differently."""
    profile = read_profile(write(SAME[variant]))
    assert profile.rows.x.tolist() == [0.0, 5.0]
    assert profile.rows.V.tolist() == [0.28, 0.0]
    assert [profile.left.mass, profile.right.mass] == [0.092, 0.067]
    assert profile.units == Units("nm", "eV")
    assert (profile.left.kind, profile.right.kind, profile.title) == ("open", "open", "")


@pytest.mark.usefixtures("size")
@pytest.mark.parametrize(
    ("content", "columns"),
    [
        (GOOD, "x,V,m"),
        (GOOD.replace(",", ""), "x, V, m"),
        (GOOD.replace(",", ";").replace(".", ","), "x,V,m"),
        ("0,0 0,280 0,092\n5,0 0,000 0,067\n", "x,V,m"),
        ("# x, V, m\n" + GOOD, ["x", "V", "m"]),
        (GOOD, "x [nm], V [eV], m [m_e]"),
    ],
)
@pytest.mark.parametrize("units", ["nm,eV", "nm, eV", ("nm", "eV"), Units("nm", "eV")])
def test_file_without_header_is_read_as_the_caller_says(content, columns, units, write):
    """Simulators write bare numbers; the caller then says what they are."""
    profile = read_profile(write(content), columns=columns, units=units)
    assert profile.rows.x.tolist() == [0.0, 5.0]
    assert profile.rows.V.tolist() == [0.28, 0.0]
    assert [profile.left.mass, profile.right.mass] == [0.092, 0.067]


def test_columns_with_their_own_units_need_no_others(write):
    """A pair of units is enough for most, not for V in eV with its deviation in meV."""
    path = write("0 0.28 2.5\n5 0 1.5\n")
    profile = read_profile(path, columns="x [um], V [eV], sigma_V [meV]")
    assert profile.units == Units("um", "eV")
    assert np.allclose(profile.rows.sigma_V, [0.0025, 0.0015], rtol=1e-15)


def test_two_numbers_with_decimal_commas_are_not_three(write):
    """Cut at its commas, "1,5 2,5" is three cells; the named columns say it is two."""
    profile = read_profile(write("1,5 2,5\n2,5 0,5\n"), columns="x,V", units="nm,eV")
    assert profile.rows.x.tolist() == [1.5, 2.5]
    assert profile.rows.V.tolist() == [2.5, 0.5]


@pytest.mark.usefixtures("size")
def test_settings_are_read_and_arguments_come_first(write):
    """A file says how it is meant; the caller may want to know otherwise."""
    head = "# Title: well #3: graded\n# LEFT: Wall # hard\n#right:wall\n  # interpolation: step\n"
    path = write(head + ROWS + GOOD)
    profile = read_profile(path)
    assert profile.title == "well #3: graded"
    assert (profile.left.kind, profile.right.kind) == ("wall", "wall")
    assert profile.rows.interpolation == "step"
    other = read_profile(path, title="mine", left="open", right="open", interpolation="linear")
    assert other.title == "mine"
    assert (other.left.kind, other.right.kind) == ("open", "open")
    assert other.rows.interpolation == "linear"


def test_interpolation_given_for_layers_is_refused(write):
    """A setting that does nothing would let the caller think that it did."""
    with pytest.raises(TableError, match="^well.csv: interpolation has no meaning for a table of"):
        read_profile(write(LAYERS + "5, 0, 0.067\n"), interpolation="step")


@pytest.mark.usefixtures("size")
def test_every_column_of_rows_reaches_the_profile(write):
    """Units may differ between columns; the profile's are those of x and V."""
    path = write(
        "sigma_V [meV], alpha [1/eV], x [angstrom], V [meV], m [m_e]\n"
        "2.5, 0.6, 0, 280, 0.092\n1.5, 0.5, 50, 0, 0.067\n"
    )
    profile = read_profile(path)
    assert profile.units == Units("angstrom", "meV")
    assert profile.rows.sigma_V.tolist() == [2.5, 1.5]
    # 1/eV is 1e-3/meV, by the meaning of the prefix.
    ends = [profile.left.alpha, profile.right.alpha]
    assert np.allclose(ends, [0.6e-3, 0.5e-3], rtol=1e-15, atol=0)


def test_every_column_of_layers_reaches_the_profile(write):
    """Layers carry names with blanks and points, which are for people."""
    path = write(
        "layer; thickness [nm]; V [eV]; V_end [meV]; m [m_e]; m_end [m_e]; alpha [1/eV]\n"
        "Al0.3Ga0.7As spacer, upper; 2,5; 0,28; 140; 0,092; 0,08; 0,6\n"
        "; 5; 0; 0; 0,067; 0,067; 0,5\n"
    )
    profile = read_profile(path, left="wall")
    assert profile.kind == "layers"
    assert profile.units == Units("nm", "eV")
    assert profile.x.tolist() == [0.0, 2.5, 7.5]
    V = profile.V([0.0, 2.5 - 1e-12, 2.5])
    assert np.allclose(V, [0.28, 0.14, 0.0], rtol=0, atol=1e-12)
    assert np.allclose(profile.m([0.0, 1.25, 5.0]), [0.092, 0.086, 0.067], rtol=1e-14)
    assert (profile.left.kind, profile.right.kind) == ("wall", "open")
    assert (profile.left.alpha, profile.right.alpha) == (0.6, 0.5)


def test_mass_is_one_without_its_column(write):
    """Dimensionless problems have no mass to write."""
    profile = read_profile(write("x [bohr], V [hartree]\n0, 1\n1, 0\n"))
    assert profile.m(0.5) == 1.0


def test_jumps_at_both_ends_are_rows_like_others(write):
    """Two rows at the first x set the potential beyond the open edge."""
    profile = read_profile(write(ROWS + "0, 0.3, 1\n0, 0, 1\n5, 0, 1\n5, 0.2, 1\n"))
    assert (profile.left.V, profile.right.V) == (0.3, 0.2)
    assert profile.V(2.5) == 0.0


@pytest.mark.usefixtures("size")
def test_source_and_digest_are_those_of_the_file(write, tmp_path):
    """A result must be traceable to the bytes it came from, line ends and mark included."""
    content = b"\xef\xbb\xbf" + (ROWS + GOOD).replace("\n", "\r\n").encode()
    write(content)
    profile = read_profile(tmp_path / "well.csv")
    assert profile.source == str(tmp_path / "well.csv")
    assert profile.sha256 == hashlib.sha256(content).hexdigest()
