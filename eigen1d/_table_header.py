"""The head of a table: settings, columns with their units, and the delimiter.

Names and units are never guessed: another spelling is answered with the right one, and a unit that
is not known with all that are.
"""

import re
import unicodedata
from dataclasses import dataclass
from difflib import get_close_matches

from ._table_faults import NUMBER, Source, nearest, quoted
from .errors import InputError
from .units import ENERGY_UNITS, LENGTH_UNITS, Units

KINDS = {  # column: what it holds
    "x": "length",
    "thickness": "length",
    "V": "energy",
    "V_end": "energy",
    "m": "mass",
    "m_end": "mass",
    "sigma_V": "energy",
    "alpha": "inverse energy",
    "layer": "text",
}
UNITS = {  # what a column holds: units it can be given in
    "length": LENGTH_UNITS,
    "energy": ENERGY_UNITS,
    "mass": ("m_e",),
    "inverse energy": tuple(f"1/{unit}" for unit in ENERGY_UNITS),
    "text": (),
}
ROW_COLUMNS = ("x", "V", "m", "sigma_V", "alpha")
LAYER_COLUMNS = ("thickness", "V", "m", "V_end", "m_end", "alpha", "layer")

# Other spellings, in lower case. They are never accepted, only answered with the right one.
_OTHER_NAMES = {
    **dict.fromkeys(("z", "position", "depth", "distance"), "x"),
    **dict.fromkeys(("potential", "energy", "ec", "e_c", "u"), "V"),
    **dict.fromkeys(("mass", "m*", "m_eff", "meff"), "m"),
    **dict.fromkeys(("width", "d", "l"), "thickness"),
    **dict.fromkeys(("sigma", "dv", "error"), "sigma_V"),
    "name": "layer",
}
# Of the same unit, never of another; after NFKC, as _unit_meant compares them.
_OTHER_UNITS = {
    **dict.fromkeys(("\N{LATIN SMALL LETTER A WITH RING ABOVE}", "a", "ang"), "angstrom"),
    **dict.fromkeys(("angstroms", "\u00e5ngstr\u00f6m", "angstr\u00f6m"), "angstrom"),
    **dict.fromkeys(("micron", "microns", "micrometer", "micrometre"), "um"),
    **dict.fromkeys(("nanometer", "nanometre", "nanometers", "nanometres"), "nm"),
    **dict.fromkeys(("meter", "metre", "meters", "metres"), "m"),
    **dict.fromkeys(("a0", "a_0", "bohrs"), "bohr"),
    **dict.fromkeys(("joule", "joules"), "J"),
    **dict.fromkeys(("kelvin", "kelvins"), "K"),
    **dict.fromkeys(("ha", "eh", "e_h", "hartrees"), "hartree"),
    **dict.fromkeys(("cm-1", "1/cm", "cm\N{MINUS SIGN}1"), "cm^-1"),
    **dict.fromkeys(("m0", "m_0", "me"), "m_e"),
    **dict.fromkeys(("ev^-1", "ev-1", "/ev"), "1/eV"),
}
# What people write for want of nothing better; NFKC makes one of each letter's two codes.
_ACCEPTED_UNITS = {
    "\N{LATIN CAPITAL LETTER A WITH RING ABOVE}": "angstrom",
    "\N{GREEK SMALL LETTER MU}m": "um",
}
_EXAMPLE = "x [nm], V [eV], m [m_e]"
DELIMITERS = {",": "commas", ";": "semicolons", "\t": "tabs", None: "blanks"}
_SETTING = re.compile(r"\s*#+\s*([^:=]*?)\s*([:=])\s*(.*?)\s*")


@dataclass(frozen=True)
class Column:
    """A column: its name and its unit, "" for text."""

    name: str
    unit: str

    def __str__(self):
        return f"{self.name} [{self.unit}]" if self.unit else self.name


@dataclass(frozen=True)
class Table:
    """A file cut into its parts; the body begins below the head, at line `first_line`."""

    source: Source
    settings: dict
    columns: tuple
    delimiter: str | None
    first_line: int

    @property
    def body(self):
        """list of str: the lines below the head."""
        return self.source.lines[self.first_line - 1 :]


# Lines and cells ----------------------------------------------------------------------------------


def without_comment(line):
    """Return the line up to its comment."""
    return line.split("#", 1)[0]


def cells_of(line, delimiter):
    """Return the cells of a line without comment, stripped of blanks."""
    if delimiter is None:
        return line.split()
    return [cell.strip() for cell in line.split(delimiter)]


def spans_of(line, delimiter):
    """Return where each of the cells begins and ends in the line."""
    if delimiter is None:
        return [m.span() for m in re.finditer(r"\S+", line)]
    spans, start = [], 0
    for cell in line.split(delimiter):
        begin = start + len(cell) - len(cell.lstrip())
        spans.append((begin, max(begin, start + len(cell.rstrip()))))
        start += len(cell) + 1
    return spans


# Head -------------------------------------------------------------------------------------------


def split(source, named, vocabulary):
    """Cut a file into its parts.

    Parameters
    ----------
    source : Source
    named : tuple of Column or None
        Columns of a file without a header.
    vocabulary : dict
        Settings that a comment line may make: key to allowed words, or to None for any text.

    Returns
    -------
    Table

    Raises
    ------
    TableError
    """
    settings, comments, top = _settings(source, vocabulary)
    if top is None:
        what = "the file has comments but no rows" if comments else "the file is empty"
        remedy = f"Write a header and rows, such as\n  {_EXAMPLE}\n  0.0, 0.280, 0.092"
        raise source.fault(what, remedy)
    line = without_comment(source.lines[top - 1])
    is_header = _is_header(line)
    if named is None and not is_header:
        raise _no_header(source, top, comments)
    if named is not None and is_header:
        raise source.fault(
            f"expected a row of numbers, found a header {quoted(line.strip())}",
            "Leave out columns and units, or put # before the header to have them used instead.",
            line=top,
            found=line.strip(),
        )
    if is_header:
        delimiter = next((d for d in (";", ",", "\t") if d in line), None)
        columns = _header_columns(source, top, line, delimiter)
        table = Table(source, settings, columns, delimiter, top + 1)
    else:
        delimiter = _delimiter_of_row(line, len(named))
        table = Table(source, settings, named, delimiter, top)
    _check_late_settings(table, vocabulary)
    return table


def _settings(source, vocabulary):
    """Return the settings, the comment lines by number, and the number of the first other line."""
    settings, comments = {}, {}
    for number, line in enumerate(source.lines, 1):
        bare = line.strip()
        if bare.startswith("#"):
            comments[number] = bare
            match = _SETTING.fullmatch(line)
            if match and match[1].lower() in vocabulary:
                _read_setting(source, number, match, vocabulary, settings)
            elif match:
                _check_no_setting(source, number, match, vocabulary)
        elif bare:
            return {key: value for key, (value, _) in settings.items()}, comments, number
    return {}, comments, None


def _read_setting(source, number, match, vocabulary, settings):
    """Read a comment line `# key: value` with a known key."""
    key, value = match[1].lower(), match[3]
    allowed = vocabulary[key]
    if match[2] == "=":
        raise _setting_fault(source, number, match, 2, "expected a colon, found '='", key)
    if allowed:
        value = _word(value)
        if value not in allowed:
            meant = nearest(value, allowed) or allowed[0]
            words = f"{', '.join(allowed[:-1])} or {allowed[-1]}"
            what = f"expected {words} for {key}, found {quoted(match[3])}"
            raise _setting_fault(source, number, match, 3, what, key, f"Write # {key}: {meant}")
    if key in settings:
        first = settings[key][1]
        raise source.fault(
            f"{key} is set twice",
            f"Keep one of lines {first} and {number}.",
            line=number,
            name=key,
            found=match[3],
            before=first,
        )
    settings[key] = (value, number)


def _check_no_setting(source, number, match, vocabulary):
    """Check that a comment with a colon in it was not meant to set something.

    One whose key nearly is a setting, or whose value is a word that only settings have, was meant
    for us; to ignore it would be to solve another problem.
    """
    close = get_close_matches(match[1].lower(), vocabulary, 1, 0.78)
    of_value = [key for key, allowed in vocabulary.items() if _word(match[3]) in (allowed or ())]
    if not close and not of_value:
        return
    known = close[0] if close else " or ".join(of_value)
    remedy = (
        f"Write # {known}: {match[3]}"
        "\nIf it is a comment only, write it without the colon or the equals sign."
    )
    what = f"unknown setting {quoted(match[1])}"
    raise _setting_fault(source, number, match, 1, what, match[1], remedy)


def _setting_fault(source, number, match, group, what, name, remedy=None):
    return source.fault(
        what,
        remedy or f"Write # {name}: {match[3]}",
        line=number,
        name=name,
        found=match[group],
        span=match.span(group),
    )


def _word(value):
    return value.split("#")[0].strip().lower()


def _check_late_settings(table, vocabulary):
    late = re.compile(rf"\s*#+\s*({'|'.join(vocabulary)})\s*[:=]", re.IGNORECASE)
    for number, line in enumerate(table.body, table.first_line):
        if "#" in line and (match := late.match(line)):
            raise table.source.fault(
                f"{match[1]} is set below the head of the table",
                "Move the line to the top of the file.",
                line=number,
                name=match[1],
                found=line.strip(),
            )


def _is_header(line):
    if "[" in line:
        return True
    return not any(NUMBER.fullmatch(c) for c in re.split(r"[\s;,]+", line) if c)


def _no_header(source, top, commented):
    last = commented.get(top - 1, "")
    if "[" in last and "]" in last:
        remedy = f"Remove the # from line {top - 1} if that is the header."
    else:
        remedy = (
            f'Write a header above it, such as "{_EXAMPLE}",\n'
            'or say what it would: columns="x,V,m" and units="nm,eV"\n'
            "(on the command line: --columns x,V,m --units nm,eV)."
        )
    found = without_comment(source.lines[top - 1]).strip()
    return source.fault(f"expected a header, found {quoted(found)}", remedy, line=top, found=found)


def _delimiter_of_row(line, count):
    """Delimiter of a file without header: the first that gives `count` cells without blanks."""
    there = [d for d in (";", "\t", ",") if d in line] + [None]
    for delimiter in there:
        cells = cells_of(line, delimiter)
        # "1,5 2,5" is two cells; cut at commas it gives "5 2".
        if len(cells) == count and not any(re.search(r"\s", cell) for cell in cells):
            return delimiter
    return there[0]


def _header_columns(source, number, line, delimiter):
    if delimiter is None:
        cell = r'"[^"]*"|[^\s\[]+(?:\s*\[[^\]]*\]?)?|\[[^\]]*\]?'
        spans = [m.span() for m in re.finditer(cell, line)]
    else:
        spans = spans_of(line, delimiter)

    def fault(index, what, remedy):
        if index is None:
            return source.fault(what, remedy, line=number, found=line.strip())
        text = line[slice(*spans[index])]
        return source.fault(
            what,
            remedy,
            line=number,
            column=index + 1,
            name=text,
            found=text,
            span=spans[index],
        )

    cells = [line[slice(*span)] for span in spans]
    last = next((k for k in reversed(range(len(cells))) if cells[k]), 0)
    if last < len(cells) - 1:
        raise fault(
            last + 1,
            "expected a column, found a separator at the end of the line",
            "Remove it, here and at the end of the rows; separators stand only between columns.",
        )
    return _columns([_without_quotes(cell) for cell in cells], fault)


def _without_quotes(cell):
    """Return a name without the quotation marks that many programs put around text."""
    quotes = re.fullmatch(r'"\s*([^"]*?)\s*"', cell)
    return quotes[1] if quotes else cell


def named_columns(columns, units):
    """Return the columns that a caller names instead of a header, or None.

    Parameters are those of `read_profile`; raises InputError.
    """
    if columns is None and units is None:
        return None
    remedy = 'Write for example columns="x,V,m" and units="nm,eV".'
    if columns is None:
        raise InputError(f"units={units!r} without columns\n  {remedy}")
    names = columns.split(",") if isinstance(columns, str) else list(columns)
    names = [str(name).strip() for name in names]
    if units is None and not all("[" in name or name == "layer" for name in names):
        raise InputError(f"columns={columns!r} without units\n  {remedy}")
    if isinstance(units, Units):
        units = (units.length, units.energy)
    elif isinstance(units, str):
        units = tuple(_accepted(unit.strip()) for unit in units.split(","))
    if units is not None:
        if len(units) != 2:
            raise InputError(
                f"units={','.join(units)!r}: expected a length and an energy, found "
                f"{len(units)} of them\n  {remedy}"
            )
        Units(*units)
        length, energy = units
        of = {"length": length, "energy": energy, "mass": "m_e", "inverse energy": f"1/{energy}"}
        names = [
            f"{name} [{of[KINDS[name]]}]" if KINDS.get(name, "text") != "text" else name
            for name in names
        ]

    def fault(index, what, remedy):
        place = "" if index is None else f", column {index + 1}"
        remedy = remedy.replace("\n", "\n  ")
        return InputError(f"columns={columns!r}{place}: {what}\n  {remedy}")

    return _columns(names, fault)


def _columns(cells, fault):
    """Read the cells of a header.

    `fault(index, what, remedy)` makes the error for one of them, or for all with index None.
    """
    columns = []
    for index, cell in enumerate(cells):
        column = _column(cell, lambda what, remedy, index=index: fault(index, what, remedy))
        names = [c.name for c in columns]
        if column.name in names:
            first = names.index(column.name) + 1
            raise fault(
                index,
                f"the column {column.name} is there twice",
                f"Remove or rename column {first} or column {index + 1}.",
            )
        columns.append(column)
    _check_set(columns, fault)
    return tuple(columns)


def _column(cell, fault):
    if '"' in cell:
        raise fault(
            f"unmatched quotation marks in {quoted(cell)}",
            "Write no quotation marks, or two around each column.",
        )
    match = re.fullmatch(r"([^\[\]]*?)\s*(?:\[\s*([^\[\]]*?)\s*\])?", cell)
    name, unit = match.groups() if match else (cell.split("[")[0].strip(), None)
    if name not in KINDS:
        raise fault(
            f"unknown column {quoted(name)}" if name else "a column without a name",
            _column_meant(name, unit)
            + f"Columns are {', '.join(ROW_COLUMNS)}; for layers {', '.join(LAYER_COLUMNS)}.",
        )
    kind = KINDS[name]
    if kind == "text":
        if not match or unit is not None:
            raise fault(f"the column {name} holds text and has no unit", f"Write {name} alone.")
        return Column(name, "")
    every = ", ".join(f"{name} [{known}]" for known in UNITS[kind])
    if not unit or not match:
        raise fault(
            f"expected a unit in brackets, found {quoted(cell)}",
            f"Write the unit that the numbers have: {every}.",
        )
    unit = _accepted(unit)
    if unit in UNITS[kind]:
        return Column(name, unit)
    other = next((k for k, units in UNITS.items() if unit in units), None)
    meant = _unit_meant(unit, kind)
    if other:
        remedy = f"Write the unit that the numbers have: {every}."
    elif meant:
        remedy = f"Write {name} [{meant}]."
    else:
        remedy = f"Convert the numbers to a unit that is known: {every}."
    found = f"the unit of {other} {quoted(unit)}" if other else quoted(unit)
    raise fault(f"expected a unit of {kind}, found {found}", remedy)


def _column_meant(name, unit):
    """Return the sentence that says which column was probably meant, or nothing."""
    # "V (eV)" and "V / eV" begin with the right word.
    first, rest = re.fullmatch(r"(\w*)\W*(.*?)\W*", name).groups()
    meant = first if first in KINDS else nearest(first or name, KINDS, _OTHER_NAMES)
    if not meant:
        return ""
    # No unit but the one found: the numbers are in that one.
    unit = _accepted(unit or rest)
    kind = KINDS[meant]
    unit = unit if unit in UNITS[kind] else _unit_meant(unit, kind)
    return f"Write {Column(meant, unit or '')}.\n"


def _accepted(unit):
    return _ACCEPTED_UNITS.get(unicodedata.normalize("NFKC", unit), unit)


def _unit_meant(unit, kind):
    """Return the unit that this is another spelling of, or None; never a unit of another size."""
    if re.match("M.", unit):  # MeV is not meV
        return None
    lower = unicodedata.normalize("NFKC", unit).lower()
    found = {known.lower(): known for known in UNITS[kind]}.get(lower) or _OTHER_UNITS.get(lower)
    return found if found in UNITS[kind] else None


def _check_set(columns, fault):
    """Check that the columns together make a table of rows or of layers."""
    names = [c.name for c in columns]
    layers = is_layers(columns)
    allowed = LAYER_COLUMNS if layers else ROW_COLUMNS
    for index, name in enumerate(names):
        if name not in allowed and (layers or "x" in names):
            table = "layers" if layers else "rows"
            raise fault(
                index,
                f"the column {name} does not belong in a table of {table}",
                f"Remove it; columns of {table} are {', '.join(allowed)}.",
            )
    if not layers and "x" not in names:
        remedy = "Add a column x [nm], the position of each row, or thickness [nm], of each layer."
        raise fault(None, "there is no column x or thickness", remedy)
    if "V" not in names:
        raise fault(None, "there is no column V", "Add a column V [eV], the potential energy.")
    if "m_end" in names and "m" not in names:
        raise fault(
            names.index("m_end"),
            "m_end without a column m",
            "Add a column m [m_e], the mass at the left side of each layer.",
        )


def is_layers(columns):
    """Return whether the columns make a table of layers, not of rows."""
    return any(c.name == "thickness" for c in columns)
