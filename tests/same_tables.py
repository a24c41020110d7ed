"""One table as spreadsheets of every country and scripts of every age write it."""

from faults_of_heads import GOOD, ROWS

# The same two rows: every variant must give x = 0, 5; V = 0.28, 0; m = 0.092, 0.067.
SAME = {
    "commas": ROWS + GOOD,
    "commas without blanks": (ROWS + GOOD).replace(", ", ","),
    "semicolons": (ROWS + GOOD).replace(",", ";"),
    "tabs": (ROWS + GOOD).replace(", ", "\t"),
    "blanks": (ROWS + GOOD).replace(",", "  "),
    "blanks before the rows": (ROWS + GOOD).replace(",", "").replace("\n", "\n  "),
    "decimal commas, semicolons": (ROWS.replace(",", ";") + "0,0;0,280;0,092\n5,0;0;,067\n"),
    "decimal commas, tabs": ROWS.replace(", ", "\t") + "0,0\t0,280\t0,092\n5\t0,000\t0,067\n",
    "decimal commas, blanks": ROWS.replace(",", "") + "0,0 0,280 0,092\n5,0 0,000 0,067\n",
    "decimal commas, commented": (
        ROWS.replace(",", ";") + "# 1.5 nm, roughly\n0;0,280;0,092 # 0.28, in fact\n5;0,0;0,067"
    ),
    "byte order mark": b"\xef\xbb\xbf" + (ROWS + GOOD).encode(),
    "CRLF": (ROWS + GOOD).replace("\n", "\r\n"),
    "CR": (ROWS + GOOD).replace("\n", "\r"),
    "byte order mark and CRLF": b"\xef\xbb\xbf" + (ROWS + GOOD).replace("\n", "\r\n").encode(),
    "no newline at the end": (ROWS + GOOD).rstrip("\n"),
    "comments everywhere": (
        "# a, b; c\n\n#\n" + ROWS[:-1] + " # [in brackets]\n"
        "  # indented, 1, 2\n0.0, 0.280, 0.092 # first, 1\n\n \t\n#\n5.0, 0, 0.067 #\n# end\n"
    ),
    "other column order": "m [m_e], x [nm], V [eV]\n0.092, 0, 0.28\n0.067, 5, 0\n",
    "quoted names": '"x [nm]","V [eV]" , "m [m_e] "\n' + GOOD,
    "quoted names between blanks": '"x [nm]" "V [eV]" "m [m_e]"\n' + GOOD.replace(",", ""),
    "exponents": ROWS + "0e0, 2.8E-1, +92e-3\n.5e1, -0, 0.67e-1\n",
    "unit without blank": "x[nm], V[ eV ], m [m_e]\n" + GOOD,
    "blanks in a header of blanks": "x [nm]  V[eV] m  [m_e]\n0 0.28 0.092\n5 0 0.067\n",
    "late colons": (
        "# measured: 3 March\n# height: 0.28\n# T = 300 K\n#:\n# http://example.org\n"
        + ROWS + "# note: none\n" + GOOD
    ),
}  # fmt: skip
