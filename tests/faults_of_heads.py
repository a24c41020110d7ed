"""Faults in the head of a table file, with the whole text that the user sees for each.

The texts were read and judged one by one; a change of wording is made here first.
"""

from typing import NamedTuple


class Fault(NamedTuple):
    """A file that cannot be read.

    `place` is what a program sees of the fault: line, column, name, found.
    """

    id: str
    content: str | bytes
    text: str
    place: tuple
    arguments: dict = {}


ROWS = "x [nm], V [eV], m [m_e]\n"
LAYERS = "thickness [nm], V [eV], m [m_e]\n"
GOOD = "0.0, 0.280, 0.092\n5.0, 0.000, 0.067\n"

HEAD_FAULTS = [
    Fault(
        "empty file",
        "",
        """\
well.csv: the file is empty
  Write a header and rows, such as
    x [nm], V [eV], m [m_e]
    0.0, 0.280, 0.092""",
        (None, None, None, None),
    ),
    Fault(
        "only comments",
        "# title: nothing yet\n\n",
        """\
well.csv: the file has comments but no rows
  Write a header and rows, such as
    x [nm], V [eV], m [m_e]
    0.0, 0.280, 0.092""",
        (None, None, None, None),
    ),
    Fault(
        "header only",
        "# a well\n" + ROWS,
        """\
well.csv, line 2: expected rows below the header, found none
    1 | # a well
    2 | x [nm], V [eV], m [m_e]
      | ^^^^^^^^^^^^^^^^^^^^^^^
  Write one row a line, with a number for each of: x, V, m.""",
        (2, None, None, None),
    ),
    Fault(
        "one row",
        ROWS + "0.0, 0.280, 0.092\n",
        """\
well.csv, line 2: expected two rows or more, found one
    1 | x [nm], V [eV], m [m_e]
    2 | 0.0, 0.280, 0.092
      | ^^^^^^^^^^^^^^^^^
  Add a row: V is known between rows only. For one layer, write a column thickness.""",
        (2, None, None, None),
    ),
    Fault(
        "binary file",
        b"\x00\x01\x02\x03",
        """\
well.csv: expected a text table, found a binary file
  Export the columns x and V as CSV text.""",
        (None, None, None, None),
    ),
    Fault(
        "spreadsheet",
        b"PK\x03\x04\x14\x00",
        """\
well.csv: expected a text table, found a spreadsheet or a zip archive
  Export the sheet as CSV text (UTF-8).""",
        (None, None, None, None),
    ),
    Fault(
        "UTF-16",
        (ROWS + GOOD).encode("utf-16"),
        """\
well.csv: expected text in UTF-8, found UTF-16
  Save it as UTF-8, or convert it with iconv -t UTF-8 -f UTF-16.""",
        (None, None, None, None),
    ),
    Fault(
        "Latin-1",
        ("# graded by hand in \u00c5\n" + ROWS + GOOD).encode("latin-1"),
        """\
well.csv, line 1: expected text in UTF-8, found the byte 0xc5
    1 | # graded by hand in \u00c5
      |                     ^
  Save it as UTF-8, or convert it with iconv -t UTF-8 -f LATIN1 if the line above reads right.""",
        (1, None, None, "0xc5"),
    ),
    Fault(
        "no header",
        GOOD,
        """\
well.csv, line 1: expected a header, found '0.0, 0.280, 0.092'
    1 | 0.0, 0.280, 0.092
      | ^^^^^^^^^^^^^^^^^
  Write a header above it, such as "x [nm], V [eV], m [m_e]",
  or say what it would: columns="x,V,m" and units="nm,eV"
  (on the command line: --columns x,V,m --units nm,eV).""",
        (1, None, None, "0.0, 0.280, 0.092"),
    ),
    Fault(
        "header behind a #",
        "# x [nm], V [eV], m [m_e]\n" + GOOD,
        """\
well.csv, line 2: expected a header, found '0.0, 0.280, 0.092'
    1 | # x [nm], V [eV], m [m_e]
    2 | 0.0, 0.280, 0.092
      | ^^^^^^^^^^^^^^^^^
  Remove the # from line 1 if that is the header.""",
        (2, None, None, "0.0, 0.280, 0.092"),
    ),
    Fault(
        "missing unit",
        "x [nm], V, m [m_e]\n" + GOOD,
        """\
well.csv, line 1, column 2 (V): expected a unit in brackets, found 'V'
    1 | x [nm], V, m [m_e]
      |         ^
  Write the unit that the numbers have: V [eV], V [meV], V [J], V [hartree], V [cm^-1], V [K].""",
        (1, 2, "V", "V"),
    ),
    Fault(
        "missing unit between blanks",
        "x [nm] V m [m_e]\n0 1 1\n1 1 1\n",
        """\
well.csv, line 1, column 2 (V): expected a unit in brackets, found 'V'
    1 | x [nm] V m [m_e]
      |        ^
  Write the unit that the numbers have: V [eV], V [meV], V [J], V [hartree], V [cm^-1], V [K].""",
        (1, 2, "V", "V"),
    ),
    Fault(
        "unit in parentheses",
        "x [nm], V (eV), m [m_e]\n" + GOOD,
        """\
well.csv, line 1, column 2 (V (eV)): unknown column 'V (eV)'
    1 | x [nm], V (eV), m [m_e]
      |         ^^^^^^
  Write V [eV].
  Columns are x, V, m, sigma_V, alpha; for layers thickness, V, m, V_end, m_end, alpha, layer.""",
        (1, 2, "V (eV)", "V (eV)"),
    ),
    Fault(
        "bracket left open",
        "x [nm], V [eV, m [m_e]\n" + GOOD,
        """\
well.csv, line 1, column 2 (V [eV): expected a unit in brackets, found 'V [eV'
    1 | x [nm], V [eV, m [m_e]
      |         ^^^^^
  Write the unit that the numbers have: V [eV], V [meV], V [J], V [hartree], V [cm^-1], V [K].""",
        (1, 2, "V [eV", "V [eV"),
    ),
    Fault(
        "separator at the end of all lines",
        "x [nm], V [eV],\n0.0, 0.28,\n5.0, 0.0,\n",
        """\
well.csv, line 1, column 3: expected a column, found a separator at the end of the line
    1 | x [nm], V [eV],
      |                ^
  Remove it, here and at the end of the rows; separators stand only between columns.""",
        (1, 3, "", ""),
    ),
    Fault(
        "empty columns at the end of all lines",
        "x [nm];V [eV];;\n0,0;0,28;;\n5,0;0,0;;\n",
        """\
well.csv, line 1, column 3: expected a column, found a separator at the end of the line
    1 | x [nm];V [eV];;
      |               ^
  Remove it, here and at the end of the rows; separators stand only between columns.""",
        (1, 3, "", ""),
    ),
    Fault(
        "quotation marks around the whole header",
        '"x [nm], V [eV]"\n0.0, 0.28\n5.0, 0.0\n',
        """\
well.csv, line 1, column 1 ("x [nm]): unmatched quotation marks in '"x [nm]'
    1 | "x [nm], V [eV]"
      | ^^^^^^^
  Write no quotation marks, or two around each column.""",
        (1, 1, '"x [nm]', '"x [nm]'),
    ),
    Fault(
        "unknown unit",
        "x [nm], V [ev], m [m_e]\n" + GOOD,
        """\
well.csv, line 1, column 2 (V [ev]): expected a unit of energy, found 'ev'
    1 | x [nm], V [ev], m [m_e]
      |         ^^^^^^
  Write V [eV].""",
        (1, 2, "V [ev]", "V [ev]"),
    ),
    Fault(
        "unknown unit of length",
        "x [pm], V [eV], m [m_e]\n" + GOOD,
        """\
well.csv, line 1, column 1 (x [pm]): expected a unit of length, found 'pm'
    1 | x [pm], V [eV], m [m_e]
      | ^^^^^^
  Convert the numbers to a unit that is known: x [nm], x [angstrom], x [um], x [m], x [bohr].""",
        (1, 1, "x [pm]", "x [pm]"),
    ),
    Fault(
        "unknown unit of mass",
        "x [nm], V [eV], m [kg]\n" + GOOD,
        """\
well.csv, line 1, column 3 (m [kg]): expected a unit of mass, found 'kg'
    1 | x [nm], V [eV], m [kg]
      |                 ^^^^^^
  Convert the numbers to a unit that is known: m [m_e].""",
        (1, 3, "m [kg]", "m [kg]"),
    ),
    Fault(
        "unit of the wrong kind",
        "x [nm], V [nm], m [m_e]\n" + GOOD,
        """\
well.csv, line 1, column 2 (V [nm]): expected a unit of energy, found the unit of length 'nm'
    1 | x [nm], V [nm], m [m_e]
      |         ^^^^^^
  Write the unit that the numbers have: V [eV], V [meV], V [J], V [hartree], V [cm^-1], V [K].""",
        (1, 2, "V [nm]", "V [nm]"),
    ),
    Fault(
        "unit of alpha",
        "x [nm], V [eV], alpha [eV^-1]\n" + GOOD,
        """\
well.csv, line 1, column 3 (alpha [eV^-1]): expected a unit of inverse energy, found 'eV^-1'
    1 | x [nm], V [eV], alpha [eV^-1]
      |                 ^^^^^^^^^^^^^
  Write alpha [1/eV].""",
        (1, 3, "alpha [eV^-1]", "alpha [eV^-1]"),
    ),
    Fault(
        "unit of a text column",
        "layer [nm], thickness [nm], V [eV]\nwell, 5, 0\n",
        """\
well.csv, line 1, column 1 (layer [nm]): the column layer holds text and has no unit
    1 | layer [nm], thickness [nm], V [eV]
      | ^^^^^^^^^^
  Write layer alone.""",
        (1, 1, "layer [nm]", "layer [nm]"),
    ),
    Fault(
        "duplicated column",
        "x [nm], V [eV], V [meV]\n" + GOOD,
        """\
well.csv, line 1, column 3 (V [meV]): the column V is there twice
    1 | x [nm], V [eV], V [meV]
      |                 ^^^^^^^
  Remove or rename column 2 or column 3.""",
        (1, 3, "V [meV]", "V [meV]"),
    ),
    Fault(
        "unknown column",
        "x [nm], potential [eV], m [m_e]\n" + GOOD,
        """\
well.csv, line 1, column 2 (potential [eV]): unknown column 'potential'
    1 | x [nm], potential [eV], m [m_e]
      |         ^^^^^^^^^^^^^^
  Write V [eV].
  Columns are x, V, m, sigma_V, alpha; for layers thickness, V, m, V_end, m_end, alpha, layer.""",
        (1, 2, "potential [eV]", "potential [eV]"),
    ),
    Fault(
        "misspelt column",
        "x [nm], V [eV], sigmaV [meV]\n" + GOOD,
        """\
well.csv, line 1, column 3 (sigmaV [meV]): unknown column 'sigmaV'
    1 | x [nm], V [eV], sigmaV [meV]
      |                 ^^^^^^^^^^^^
  Write sigma_V [meV].
  Columns are x, V, m, sigma_V, alpha; for layers thickness, V, m, V_end, m_end, alpha, layer.""",
        (1, 3, "sigmaV [meV]", "sigmaV [meV]"),
    ),
    Fault(
        "column without a name",
        "x [nm], , V [eV]\n0.0, , 0.280\n",
        """\
well.csv, line 1, column 2: a column without a name
    1 | x [nm], , V [eV]
      |         ^
  Columns are x, V, m, sigma_V, alpha; for layers thickness, V, m, V_end, m_end, alpha, layer.""",
        (1, 2, "", ""),
    ),
    Fault(
        "column of layers among rows",
        "x [nm], V [eV], V_end [eV]\n" + GOOD,
        """\
well.csv, line 1, column 3 (V_end [eV]): the column V_end does not belong in a table of rows
    1 | x [nm], V [eV], V_end [eV]
      |                 ^^^^^^^^^^
  Remove it; columns of rows are x, V, m, sigma_V, alpha.""",
        (1, 3, "V_end [eV]", "V_end [eV]"),
    ),
    Fault(
        "no position",
        "V [eV], m [m_e]\n0.280, 0.092\n",
        """\
well.csv, line 1: there is no column x or thickness
    1 | V [eV], m [m_e]
      | ^^^^^^^^^^^^^^^
  Add a column x [nm], the position of each row, or thickness [nm], of each layer.""",
        (1, None, None, "V [eV], m [m_e]"),
    ),
    Fault(
        "no potential",
        "x [nm], m [m_e]\n0.0, 0.092\n",
        """\
well.csv, line 1: there is no column V
    1 | x [nm], m [m_e]
      | ^^^^^^^^^^^^^^^
  Add a column V [eV], the potential energy.""",
        (1, None, None, "x [nm], m [m_e]"),
    ),
    Fault(
        "m_end without m",
        "thickness [nm], V [eV], m_end [m_e]\n5, 0, 0.1\n",
        """\
well.csv, line 1, column 3 (m_end [m_e]): m_end without a column m
    1 | thickness [nm], V [eV], m_end [m_e]
      |                         ^^^^^^^^^^^
  Add a column m [m_e], the mass at the left side of each layer.""",
        (1, 3, "m_end [m_e]", "m_end [m_e]"),
    ),
    Fault(
        "unknown edge",
        "# left: opne\n" + ROWS + GOOD,
        """\
well.csv, line 1: expected open or wall for left, found 'opne'
    1 | # left: opne
      |         ^^^^
  Write # left: open""",
        (1, None, "left", "opne"),
    ),
    Fault(
        "misspelt setting",
        "# interplation: step\n" + ROWS + GOOD,
        """\
well.csv, line 1: unknown setting 'interplation'
    1 | # interplation: step
      |   ^^^^^^^^^^^^
  Write # interpolation: step
  If it is a comment only, write it without the colon or the equals sign.""",
        (1, None, "interplation", "interplation"),
    ),
    Fault(
        "unknown setting with a word of settings",
        "# edges: wall\n" + ROWS + GOOD,
        """\
well.csv, line 1: unknown setting 'edges'
    1 | # edges: wall
      |   ^^^^^
  Write # left or right: wall
  If it is a comment only, write it without the colon or the equals sign.""",
        (1, None, "edges", "edges"),
    ),
    Fault(
        "equals sign in a setting",
        "# left = wall\n" + ROWS + GOOD,
        """\
well.csv, line 1: expected a colon, found '='
    1 | # left = wall
      |        ^
  Write # left: wall""",
        (1, None, "left", "="),
    ),
    Fault(
        "setting made twice",
        "# left: wall\n# right: wall\n# left: open\n" + ROWS + GOOD,
        """\
well.csv, line 3: left is set twice
    1 | # left: wall
    3 | # left: open
      | ^^^^^^^^^^^^
  Keep one of lines 1 and 3.""",
        (3, None, "left", "open"),
    ),
    Fault(
        "setting below the header",
        ROWS + "# left: wall\n" + GOOD,
        """\
well.csv, line 2: left is set below the head of the table
    1 | x [nm], V [eV], m [m_e]
    2 | # left: wall
      | ^^^^^^^^^^^^
  Move the line to the top of the file.""",
        (2, None, "left", "# left: wall"),
    ),
    Fault(
        "interpolation of layers",
        "# interpolation: step\n" + LAYERS + "5.0, 0.0, 0.067\n",
        """\
well.csv: interpolation has no meaning for a table of layers
  Leave it out; a layer is graded by a column V_end.""",
        (None, None, "interpolation", "step"),
    ),
    Fault(
        "header and columns",
        ROWS + GOOD,
        """\
well.csv, line 1: expected a row of numbers, found a header 'x [nm], V [eV], m [m_e]'
    1 | x [nm], V [eV], m [m_e]
      | ^^^^^^^^^^^^^^^^^^^^^^^
  Leave out columns and units, or put # before the header to have them used instead.""",
        (1, None, None, "x [nm], V [eV], m [m_e]"),
        {"columns": "x,V,m", "units": "nm,eV"},
    ),
    Fault(
        "unknown interpolation",
        "# interpolation: stp\n" + ROWS + GOOD,
        """\
well.csv, line 1: expected linear, step, smooth or monotone for interpolation, found 'stp'
    1 | # interpolation: stp
      |                  ^^^
  Write # interpolation: step""",
        (1, None, "interpolation", "stp"),
    ),
    Fault(
        "binary zeros inside",
        b"x [nm], V [eV], m [m_e]\n0.0, 0.280, 0.092\n5.0, 0.000, 0.067\n6.0, \x00, 0.067\n",
        """\
well.csv: expected a text table, found a binary file
  Export the columns x and V as CSV text.""",
        (None, None, None, None),
    ),
]
