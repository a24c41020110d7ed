"""Faults in the rows of a table file, with the whole text that the user sees for each."""

from faults_of_heads import GOOD, LAYERS, ROWS, Fault

ROW_FAULTS = [
    Fault(
        "ragged row, too few",
        ROWS + GOOD + "6.0, 0.1\n7.0, 0.1\n",
        """\
well.csv, line 4, column 3 (m [m_e]): expected 3 values, found 2
    3 | 5.0, 0.000, 0.067
    4 | 6.0, 0.1
      |         ^
  Write one value for each column: x [nm], V [eV], m [m_e].
  The same fault is on line 5. Nothing was computed.""",
        (4, 3, "m [m_e]", "6.0, 0.1"),
    ),
    Fault(
        "ragged row, too many",
        ROWS + GOOD + "6.0, 0.1, 0.067, 0.067\n",
        """\
well.csv, line 4, column 4: expected 3 values, found 4
    3 | 5.0, 0.000, 0.067
    4 | 6.0, 0.1, 0.067, 0.067
      |                  ^^^^^
  Write one value for each column: x [nm], V [eV], m [m_e].""",
        (4, 4, None, "6.0, 0.1, 0.067, 0.067"),
    ),
    Fault(
        "separator at the end of rows",
        ROWS + "0.0, 0.280, 0.092,\n5.0, 0.000, 0.067,\n",
        """\
well.csv, line 2, column 4: expected 3 values, found 4
    1 | x [nm], V [eV], m [m_e]
    2 | 0.0, 0.280, 0.092,
      |                   ^
  Remove the separator at the end of the row; it stands only between values.
  The same fault is on line 3. Nothing was computed.""",
        (2, 4, None, "0.0, 0.280, 0.092,"),
    ),
    Fault(
        "value behind a #",
        ROWS + GOOD + "6.0, 0.1, # 0.067\n7.0, 0.1 # 0.067\n",
        """\
well.csv, line 4, column 3 (m [m_e]): expected a number, found ''
    3 | 5.0, 0.000, 0.067
    4 | 6.0, 0.1, # 0.067
      |           ^
  Write the missing number; an empty place is not taken as 0.
  Another fault is on line 5. Nothing was computed.""",
        (4, 3, "m [m_e]", ""),
    ),
    Fault(
        "decimal commas between commas",
        ROWS + "0,0, 0,280, 0,092\n5,0, 0,000, 0,067\n",
        """\
well.csv, line 2, column 4: expected 3 values, found 6
    1 | x [nm], V [eV], m [m_e]
    2 | 0,0, 0,280, 0,092
      |        ^^^^^^^^^^
  Write decimal points, or separate all columns with semicolons:
  where commas separate, a decimal comma cuts a number in two.
  The same fault is on line 3. Nothing was computed.""",
        (2, 4, None, "0,0, 0,280, 0,092"),
    ),
    Fault(
        "semicolons below commas",
        ROWS + "0,0; 0,280; 0,092\n5,0; 0,000; 0,067\n",
        """\
well.csv, line 2, column 4: expected 3 values, found 4
    1 | x [nm], V [eV], m [m_e]
    2 | 0,0; 0,280; 0,092
      |               ^^^
  Separate all lines alike: the first has commas, this one has semicolons.
  The same fault is on line 3. Nothing was computed.""",
        (2, 4, None, "0,0; 0,280; 0,092"),
    ),
    Fault(
        "blanks below commas",
        ROWS + "0.0 0.280 0.092\n5.0 0.000 0.067\n",
        """\
well.csv, line 2, column 2 (V [eV]): expected 3 values, found 1
    1 | x [nm], V [eV], m [m_e]
    2 | 0.0 0.280 0.092
      |                ^
  Separate all lines alike: the first has commas, this one has blanks.
  The same fault is on line 3. Nothing was computed.""",
        (2, 2, "V [eV]", "0.0 0.280 0.092"),
    ),
    Fault(
        "commas below blanks",
        "x [nm] V [eV] m [m_e]\n" + GOOD,
        """\
well.csv, line 2, column 1 (x [nm]): expected a number, found '0.0,'
    1 | x [nm] V [eV] m [m_e]
    2 | 0.0, 0.280, 0.092
      | ^^^^
  Separate all lines alike: the first has blanks, this one has commas.
  The same fault is on line 3. Nothing was computed.""",
        (2, 1, "x [nm]", "0.0,"),
    ),
    Fault(
        "decimal commas and points",
        "x [nm]; V [eV]\n0.0; 0.280\n5.0; 0,000\n",
        """\
well.csv, line 3, column 2 (V [eV]): expected a number, found '0,000'
    2 | 0.0; 0.280
    3 | 5.0; 0,000
      |      ^^^^^
  Write 0.000: the file has decimal points too, and only one of the two can be meant.""",
        (3, 2, "V [eV]", "0,000"),
    ),
    Fault(
        "commas that may part thousands",
        "x [nm]; V [eV]\n0; 0\n1,500; 2\n3,000; 0\n",
        """\
well.csv, line 3, column 1 (x [nm]): expected a number, found '1,500'
    2 | 0; 0
    3 | 1,500; 2
      | ^^^^^
  Write 1.500 or 1500: the comma may be decimal or between thousands.
  The same fault is on line 4. Nothing was computed.""",
        (3, 1, "x [nm]", "1,500"),
    ),
    Fault(
        "thousands with both signs",
        "x [nm]; V [eV]\n0,5; 0\n1.500,5; 2\n3.000,5; 0\n",
        """\
well.csv, line 2, column 1 (x [nm]): expected a number, found '0,5'
    1 | x [nm]; V [eV]
    2 | 0,5; 0
      | ^^^
  Write 0.5: the file has decimal points too, and only one of the two can be meant.
  The same fault is on lines 3 and 4. Nothing was computed.""",
        (2, 1, "x [nm]", "0,5"),
    ),
    Fault(
        "letter O",
        ROWS + "4.5, 0.280, 0.092\n"
        "5.0, O.280, 0.092\n"
        "# wait\n"
        "6.0, 0.28O, 0.092\n"
        "7.0, .28O, 0.092\n",
        """\
well.csv, line 3, column 2 (V [eV]): expected a number, found 'O.280'
    2 | 4.5, 0.280, 0.092
    3 | 5.0, O.280, 0.092
      |      ^^^^^
  Write a plain decimal number, such as 0.280 or 2.8e-1; this one begins with the letter O.
  The same fault is on lines 5 and 6. Nothing was computed.""",
        (3, 2, "V [eV]", "O.280"),
    ),
    Fault(
        "letter O inside",
        ROWS + "4.5, 0.28O, 0.092\n",
        """\
well.csv, line 2, column 2 (V [eV]): expected a number, found '0.28O'
    1 | x [nm], V [eV], m [m_e]
    2 | 4.5, 0.28O, 0.092
      |      ^^^^^
  Write a plain decimal number, such as 0.280 or 2.8e-1; this one contains the letter O.""",
        (2, 2, "V [eV]", "0.28O"),
    ),
    Fault(
        "empty place",
        ROWS + "4.5, , 0.092\n5.0, 0.1, 0.067\n",
        """\
well.csv, line 2, column 2 (V [eV]): expected a number, found ''
    1 | x [nm], V [eV], m [m_e]
    2 | 4.5, , 0.092
      |      ^
  Write the missing number; an empty place is not taken as 0.""",
        (2, 2, "V [eV]", ""),
    ),
    Fault(
        "minus sign of print",
        ROWS + "\u22124.5, 0.280, 0.092\n5.0, 0.1, 0.067\n",
        """\
well.csv, line 2, column 1 (x [nm]): expected a number, found '\N{MINUS SIGN}4.5'
    1 | x [nm], V [eV], m [m_e]
    2 | \N{MINUS SIGN}4.5, 0.280, 0.092
      | ^^^^
  Write -4.5 with a hyphen; this one has the minus sign U+2212.""",
        (2, 1, "x [nm]", "\u22124.5"),
    ),
    Fault(
        "exponent of Fortran",
        ROWS + "0.0, 2.8D-1, 0.092\n5.0, 0.1, 0.067\n",
        """\
well.csv, line 2, column 2 (V [eV]): expected a number, found '2.8D-1'
    1 | x [nm], V [eV], m [m_e]
    2 | 0.0, 2.8D-1, 0.092
      |      ^^^^^^
  Write 2.8e-1: the exponent is marked by e, not by D.""",
        (2, 2, "V [eV]", "2.8D-1"),
    ),
    Fault(
        "blank between thousands",
        ROWS + "1 500, 0.280, 0.092\n5.0, 0.1, 0.067\n",
        """\
well.csv, line 2, column 1 (x [nm]): expected a number, found '1 500'
    1 | x [nm], V [eV], m [m_e]
    2 | 1 500, 0.280, 0.092
      | ^^^^^
  Write 1500, with nothing between the thousands.""",
        (2, 1, "x [nm]", "1 500"),
    ),
    Fault(
        "unit in a row",
        ROWS + "0.0, 0.280 eV, 0.092\n5.0, 0.1, 0.067\n",
        """\
well.csv, line 2, column 2 (V [eV]): expected a number, found '0.280 eV'
    1 | x [nm], V [eV], m [m_e]
    2 | 0.0, 0.280 eV, 0.092
      |      ^^^^^^^^
  Write 0.280 alone; a unit belongs in the header.""",
        (2, 2, "V [eV]", "0.280 eV"),
    ),
    Fault(
        "quotation marks",
        ROWS + '0.0, "0.280", 0.092\n5.0, 0.1, 0.067\n',
        """\
well.csv, line 2, column 2 (V [eV]): expected a number, found '"0.280"'
    1 | x [nm], V [eV], m [m_e]
    2 | 0.0, "0.280", 0.092
      |      ^^^^^^^
  Write 0.280, without quotation marks.""",
        (2, 2, "V [eV]", '"0.280"'),
    ),
    Fault(
        "word",
        ROWS + "0.0, n/a, 0.092\n5.0, 0.1, 0.067\n",
        """\
well.csv, line 2, column 2 (V [eV]): expected a number, found 'n/a'
    1 | x [nm], V [eV], m [m_e]
    2 | 0.0, n/a, 0.092
      |      ^^^
  Write a plain decimal number, such as 0.280 or 2.8e-1.""",
        (2, 2, "V [eV]", "n/a"),
    ),
    Fault(
        "python number",
        ROWS + "0.0, 0x1p3, 0.092\n5.0, 0.1, 0.067\n",
        """\
well.csv, line 2, column 2 (V [eV]): expected a number, found '0x1p3'
    1 | x [nm], V [eV], m [m_e]
    2 | 0.0, 0x1p3, 0.092
      |      ^^^^^
  Write a plain decimal number, such as 0.280 or 2.8e-1.""",
        (2, 2, "V [eV]", "0x1p3"),
    ),
    Fault(
        "many faults",
        ROWS + "".join(f"{x}, ?, 1\n" for x in range(20)),
        """\
well.csv, line 2, column 2 (V [eV]): expected a number, found '?'
    1 | x [nm], V [eV], m [m_e]
    2 | 0, ?, 1
      |    ^
  Write a plain decimal number, such as 0.280 or 2.8e-1.
  The same fault is on lines 3, 4, 5, 6, 7 and 14 more lines. Nothing was computed.""",
        (2, 2, "V [eV]", "?"),
    ),
    Fault(
        "long line",
        ROWS + GOOD + "6.0, " + "9" * 200 + "x, 0.067\n",
        """\
well.csv, line 4, column 2 (V [eV]): expected a number, found '999999999999999999999999999999999...'
    3 | 5.0, 0.000, 0.067
    4 | 6.0, 999999999999999999999999999999999999999999999999999999999999999999999999999
      |      ^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^^
  Write a plain decimal number, such as 0.280 or 2.8e-1.""",
        (
            4,
            2,
            "V [eV]",
            "99999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999999x",
        ),
    ),
    Fault(
        "control character",
        ROWS + GOOD + "6.0, \x1b[31m1, 0.067\n",
        """\
well.csv, line 4, column 2 (V [eV]): expected a number, found '\ufffd[31m1'
    3 | 5.0, 0.000, 0.067
    4 | 6.0, \ufffd[31m1, 0.067
      |      ^^^^^^
  Write a plain decimal number, such as 0.280 or 2.8e-1.""",
        (4, 2, "V [eV]", "\x1b[31m1"),
    ),
    Fault(
        "nan",
        ROWS + "0.0, 0.280, 0.092\n5.0, nan, 0.067\n",
        """\
well.csv, line 3, column 2 (V [eV]): expected a finite number, found 'nan'
    2 | 0.0, 0.280, 0.092
    3 | 5.0, nan, 0.067
      |      ^^^
  Write a number below 1e308, or remove the row.""",
        (3, 2, "V [eV]", "nan"),
    ),
    Fault(
        "inf",
        ROWS + "0.0, 0.280, 0.092\n5.0, -inf, 0.067\n",
        """\
well.csv, line 3, column 2 (V [eV]): expected a finite number, found '-inf'
    2 | 0.0, 0.280, 0.092
    3 | 5.0, -inf, 0.067
      |      ^^^^
  Write a number below 1e308, or remove the row.""",
        (3, 2, "V [eV]", "-inf"),
    ),
    Fault(
        "overflow",
        ROWS + "0.0, 0.280, 0.092\n5.0, 1e999, 0.067\n",
        """\
well.csv, line 3, column 2 (V [eV]): expected a finite number, found '1e999'
    2 | 0.0, 0.280, 0.092
    3 | 5.0, 1e999, 0.067
      |      ^^^^^
  Write a number below 1e308, or remove the row.""",
        (3, 2, "V [eV]", "1e999"),
    ),
    Fault(
        "x not ascending",
        ROWS + "0.0, 0.280, 0.092\n5.0, 0.1, 0.067\n# dip\n\n4.0, 0.1, 0.067\n6.0, 0.1, 0.067\n",
        """\
well.csv, line 6, column 1 (x [nm]): expected x no less than in the row above, found '4.0'
    3 | 5.0, 0.1, 0.067
    6 | 4.0, 0.1, 0.067
      | ^^^
  Put the row where its x belongs, or correct x.""",
        (6, 1, "x [nm]", "4.0"),
    ),
    Fault(
        "x descending",
        ROWS + "5.0, 0.280, 0.092\n4.0, 0.1, 0.067\n3.0, 0.1, 0.067\n",
        """\
well.csv, line 3, column 1 (x [nm]): expected x no less than in the row above, found '4.0'
    2 | 5.0, 0.280, 0.092
    3 | 4.0, 0.1, 0.067
      | ^^^
  Reverse the order of the rows: x descends throughout.
  The same fault is on line 4. Nothing was computed.""",
        (3, 1, "x [nm]", "4.0"),
    ),
    Fault(
        "three rows at one x",
        ROWS + "0.0, 0.280, 0.092\n"
        "5.0, 0.280, 0.067\n"
        "5.0, 0.1, 0.067\n"
        "5.0, 0.0, 0.067\n"
        "6.0, 0.1, 0.067\n",
        """\
well.csv, line 5, column 1 (x [nm]): expected at most two rows at one x, found '5.0'
    4 | 5.0, 0.1, 0.067
    5 | 5.0, 0.0, 0.067
      | ^^^
  Keep two: a jump is the value on its left, then the value on its right, at one x.""",
        (5, 1, "x [nm]", "5.0"),
    ),
    Fault(
        "two rows at one place",
        ROWS + "5.0, 0.280, 0.067\n5.0, 0.1, 0.067\n",
        """\
well.csv, line 3, column 1 (x [nm]): expected a second x, found '5.0'
    2 | 5.0, 0.280, 0.067
    3 | 5.0, 0.1, 0.067
      | ^^^
  Add a row at another x.""",
        (3, 1, "x [nm]", "5.0"),
    ),
    Fault(
        "negative mass",
        ROWS + "0.0, 0.280, -0.092\n5.0, 0.1, 0\n",
        """\
well.csv, line 2, column 3 (m [m_e]): expected a positive mass, found '-0.092'
    1 | x [nm], V [eV], m [m_e]
    2 | 0.0, 0.280, -0.092
      |             ^^^^^^
  Write the effective mass in electron masses, such as 0.067.
  The same fault is on line 3. Nothing was computed.""",
        (2, 3, "m [m_e]", "-0.092"),
    ),
    Fault(
        "zero mass at the end of a layer",
        "thickness [nm], V [eV], m [m_e], m_end [m_e]\n5.0, 0.0, 0.067, 0.0\n",
        """\
well.csv, line 2, column 4 (m_end [m_e]): expected a positive mass, found '0.0'
    1 | thickness [nm], V [eV], m [m_e], m_end [m_e]
    2 | 5.0, 0.0, 0.067, 0.0
      |                  ^^^
  Write the effective mass in electron masses, such as 0.067.""",
        (2, 4, "m_end [m_e]", "0.0"),
    ),
    Fault(
        "negative thickness",
        LAYERS + "5.0, 0.0, 0.067\n-5.0, 0.3, 0.092\n",
        """\
well.csv, line 3, column 1 (thickness [nm]): expected a positive thickness, found '-5.0'
    2 | 5.0, 0.0, 0.067
    3 | -5.0, 0.3, 0.092
      | ^^^^
  Write the thickness, or remove the layer.""",
        (3, 1, "thickness [nm]", "-5.0"),
    ),
    Fault(
        "zero thickness",
        LAYERS + "0, 0.0, 0.067\n",
        """\
well.csv, line 2, column 1 (thickness [nm]): expected a positive thickness, found '0'
    1 | thickness [nm], V [eV], m [m_e]
    2 | 0, 0.0, 0.067
      | ^
  Write the thickness, or remove the layer.""",
        (2, 1, "thickness [nm]", "0"),
    ),
    Fault(
        "thickness lost in rounding",
        LAYERS + "1e3, 0.0, 0.067\n1e-14, 0.3, 0.067\n",
        """\
well.csv, line 3, column 1 (thickness [nm]): expected a thickness that counts, found '1e-14'
    2 | 1e3, 0.0, 0.067
    3 | 1e-14, 0.3, 0.067
      | ^^^^^
  Remove the layer: it changes no digit of the position where it ends.""",
        (3, 1, "thickness [nm]", "1e-14"),
    ),
    Fault(
        "negative sigma",
        "x [nm], V [eV], sigma_V [meV]\n0.0, 0.280, 2.5\n5.0, 0.0, -2.5\n",
        """\
well.csv, line 3, column 3 (sigma_V [meV]): expected 0 or more, found '-2.5'
    2 | 0.0, 0.280, 2.5
    3 | 5.0, 0.0, -2.5
      |           ^^^^
  Write the standard deviation of V, which has no sign.""",
        (3, 3, "sigma_V [meV]", "-2.5"),
    ),
    Fault(
        "negative alpha",
        "x [nm], V [eV], alpha [1/eV]\n0.0, 0.280, 0.6\n5.0, 0.0, -0.6\n",
        """\
well.csv, line 3, column 3 (alpha [1/eV]): expected 0 or more, found '-0.6'
    2 | 0.0, 0.280, 0.6
    3 | 5.0, 0.0, -0.6
      |           ^^^^
  Write 0 or more: counting levels by nodes needs a mass that does not fall with energy.""",
        (3, 3, "alpha [1/eV]", "-0.6"),
    ),
    Fault(
        "text without header",
        "0.0, 0.280, 0.092\nS.0, 0.000, 0.067\n",
        """\
well.csv, line 2, column 1 (x [nm]): expected a number, found 'S.0'
    1 | 0.0, 0.280, 0.092
    2 | S.0, 0.000, 0.067
      | ^^^
  Write a plain decimal number, such as 0.280 or 2.8e-1.""",
        (2, 1, "x [nm]", "S.0"),
        {"columns": "x,V,m", "units": "nm,eV"},
    ),
    Fault(
        "ragged without header",
        GOOD,
        """\
well.csv, line 1, column 3: expected 2 values, found 3
    1 | 0.0, 0.280, 0.092
      |             ^^^^^
  Write one value for each column: x [nm], V [eV].
  The same fault is on line 2. Nothing was computed.""",
        (1, 3, None, "0.0, 0.280, 0.092"),
        {"columns": "x,V", "units": "nm,eV"},
    ),
    Fault(
        "two kinds of fault",
        ROWS + "0.0, O.28, 0.092\n1.0, 0.28\n2.0, ?, 0.092\n3.0, 1, 1, 1\n",
        """\
well.csv, line 2, column 2 (V [eV]): expected a number, found 'O.28'
    1 | x [nm], V [eV], m [m_e]
    2 | 0.0, O.28, 0.092
      |      ^^^^
  Write a plain decimal number, such as 0.280 or 2.8e-1; this one begins with the letter O.
  The same fault is on line 4. Other faults are on lines 3 and 5. Nothing was computed.""",
        (2, 2, "V [eV]", "O.28"),
    ),
    Fault(
        "spreadsheet error",
        ROWS + "0.0, #N/A, 0.092\n5.0, 0.0, 0.067\n",
        """\
well.csv, line 2, column 3 (m [m_e]): expected 3 values, found 2
    1 | x [nm], V [eV], m [m_e]
    2 | 0.0, #N/A, 0.092
      |     ^
  Write the missing values; what follows # is a comment.""",
        (2, 3, "m [m_e]", "0.0,"),
    ),
]
