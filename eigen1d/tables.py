"""Tables: from the text of a file to a Profile, and a clear word on every fault on the way.

    x [nm], V [eV], m [m_e]      # rows, or  thickness [nm], V [eV], m [m_e]  for layers
    0.0, 0.280, 0.092

The way is: bytes -> text -> settings and columns -> numbers -> Profile. A clean body is parsed at
once: by numpy, or, if it is large, by kernels that take its bytes as they are, so that it never
becomes text. Only where that fails is it read again line by line, to find and describe faults;
line numbers exist on that second way alone.
"""

import hashlib
import os
import re
from contextlib import suppress
from dataclasses import replace

import numpy as np

from ._interpolation import INTERPOLATIONS
from ._parts import EDGES
from ._table_faults import NUMBER, Source, number_remedy, quoted
from ._table_header import (
    DELIMITERS,
    KINDS,
    cells_of,
    is_layers,
    named_columns,
    spans_of,
    split,
    without_comment,
)
from ._table_text import read_bytes, text_source
from .errors import InputError, TableError
from .profile import Profile
from .units import Units, energy_in_hartree

# Bytes of a file from which on kernels pay. To compile them takes 1.5 s, once; numpy reads a file
# of this size in 0.5 s.
_LARGE = 1 << 24
_HEAD = 1 << 16  # bytes at the top of a large file, its head among them

# What `# key: value` lines may set, and the words they may set it to.
SETTINGS = {"title": None, "left": EDGES, "right": EDGES, "interpolation": INTERPOLATIONS}


def read_profile(
    path, *, interpolation=None, left=None, right=None, columns=None, units=None, title=None
):
    """Read a profile from a table of rows or of layers.

    Commas, semicolons, tabs or blanks separate; a decimal comma is understood where commas do not.
    `#` starts a comment. Lines ``# key: value`` before the header set title, left, right and
    interpolation. The header names each column with its unit in brackets, in any order:
    ``x [nm], V [eV], m [m_e], sigma_V [meV], alpha [1/eV]`` for rows, or ``thickness [nm], V [eV],
    m [m_e], V_end [eV], m_end [m_e], alpha [1/eV], layer`` for layers. Without a column m the mass
    is 1.

    Parameters
    ----------
    path : str or PathLike
        Text in UTF-8.
    interpolation, left, right, title : str, optional
        As for `Profile.from_rows`; they take the place of what the file says.
    columns : str, optional
        For a file without a header: the names of its columns, such as ``"x,V,m"``.
    units : str or Units, optional
        The units of length and energy that go with `columns`, such as ``"nm,eV"``.

    Returns
    -------
    Profile
        In the units of x (or thickness) and V, with `source` and `sha256` of the file.

    Raises
    ------
    TableError
        A fault in the file: one message with the place, what was found and what to write instead.
    InputError
        A fault in the arguments.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.NamedTemporaryFile("w", suffix=".csv") as file:
    ...     _ = file.write("x [nm], V [eV]\\n0, 0.3\\n2, 0.3\\n2, 0.0\\n9, 0.0\\n")
    ...     file.flush()
    ...     read_profile(file.name, right="wall").V([1, 5])
    array([0.3, 0. ])
    """
    given = {"interpolation": interpolation, "left": left, "right": right, "title": title}
    given = {key: value for key, value in given.items() if value is not None}
    for key, value in given.items():
        if SETTINGS[key] and value not in SETTINGS[key]:
            raise InputError(f"unknown {key} {value!r}; write one of: {', '.join(SETTINGS[key])}")
    named = named_columns(columns, units)
    path = os.fsdecode(path)
    table, values, sha256 = _large_table(path, named) or _table(path, named)
    _check_values(table, values)
    table = replace(table, source=Source(path))  # the text of the file is not needed any more
    if is_layers(table.columns) and "interpolation" in table.settings | given:
        raise table.source.fault(
            "interpolation has no meaning for a table of layers",
            "Leave it out; a layer is graded by a column V_end.",
            name="interpolation",
            found=(table.settings | given)["interpolation"],
        )
    profile = _profile(table, values, table.settings | given)
    return profile.with_source(path, sha256)


# Numbers ----------------------------------------------------------------------------------------


def _has_decimal_commas(numbers):
    """Whether commas in this text of numbers can only be decimal commas.

    Not if there are points too, nor if every comma could as well stand between thousands.
    """
    return (
        "," in numbers
        and "." not in numbers
        and re.search(r"(?<!\d)(0\d*)?,|\d{4},|,(?!\d{3}(?!\d))", numbers) is not None
    )


def _table(path, named):
    """Return a table, its numbers, shape (rows, columns), text being NaN, and the file's digest."""
    data = read_bytes(path)
    table = split(text_source(path, data), named, SETTINGS)
    values = _numbers_at_once(table)
    if values is None:
        values = _numbers_by_line(table)
    return table, values, hashlib.sha256(data).hexdigest()


def _large_table(path, named):
    """Return the same of a large file that has numbers alone below its head, else None."""
    if not os.path.isfile(path) or os.path.getsize(path) < _LARGE:
        return None
    # Whatever is wrong, the other way meets it again and describes it.
    with suppress(OSError, TableError), open(path, "rb") as file:
        head = file.read(_HEAD)
        head = head[: head.rfind(b"\n") + 1]
        if b"\r" in head.replace(b"\r\n", b""):
            return None  # it ends some lines, but not in what follows
        table = split(text_source(path, head), named, SETTINGS)
        if any(c.name == "layer" for c in table.columns):
            return None
        start = sum(len(line) + 1 for line in head.split(b"\n")[: table.first_line - 1])
        commas = table.delimiter != "," and _has_decimal_commas(_bare(table.body))
        marks = table.delimiter, "," if commas else "."
        file.seek(start)
        digest = hashlib.sha256(head[:start])
        from ._numbers import numbers  # loads numba

        values = numbers(file, len(table.columns), *marks, digest)
        if values is not None:
            sha256 = digest.hexdigest()
            source = Source(path, lambda: _read_again(path, sha256))
            return replace(table, source=source), values, sha256
    return None


def _read_again(path, sha256):
    data = read_bytes(path)
    if hashlib.sha256(data).hexdigest() != sha256:
        raise Source(path).fault(
            "the file was changed while it was read", "Wait until it is complete, then try again."
        )
    return data


def _bare(body):
    """Return lines as one text without comments."""
    return re.sub("#[^\n]*", "", "\n".join(body))


def _numbers_at_once(table):
    """Return the numbers of a body without fault, or None if it must be read by line."""
    if any(c.name == "layer" for c in table.columns):
        return None  # loadtxt can skip a column, but then takes rows of any length
    if not any(without_comment(line).strip() for line in table.body):
        return None  # loadtxt would warn
    body = table.body
    if table.delimiter != "," and "," in (bare := _bare(body)):
        if not _has_decimal_commas(bare):
            return None
        body = bare.replace(",", ".").split("\n")
    try:
        # Of numpy's ways this is the fastest that is not deprecated: 0.95 s for 10**6 rows of three
        # numbers; one float() a cell takes 1.3 s, an open StringIO instead of the list 1.1 s.
        values = np.loadtxt(body, delimiter=table.delimiter, comments="#", ndmin=2)
    except ValueError:
        return None
    return values if values.shape[1] == len(table.columns) else None


def _rows(table):
    """Yield the line number of each row, and the row without its comment."""
    for number, line in enumerate(table.body, table.first_line):
        bare = without_comment(line)
        if bare.strip():
            yield number, bare


def _numbers_by_line(table):
    count = len(table.columns)
    numeric = [k for k, c in enumerate(table.columns) if KINDS[c.name] != "text"]
    rows = (cells_of(bare, table.delimiter) for _, bare in _rows(table))
    commas = table.delimiter != "," and _has_decimal_commas(
        "\n".join(cells[k] for cells in rows for k in numeric if k < len(cells))
    )
    values = np.full((sum(1 for _ in _rows(table)), count), np.nan)
    faults = []  # (kind, line, column)
    for row, (number, bare) in enumerate(_rows(table)):
        cells = cells_of(bare, table.delimiter)
        if len(cells) != count:
            faults.append(("row", number, min(len(cells), count) + 1))
            continue
        for k in numeric:
            cell = cells[k].replace(",", ".") if commas and "." not in cells[k] else cells[k]
            if commas and cell == cells[k] and "." in cell or not NUMBER.fullmatch(cell):
                faults.append(("number", number, k + 1))
            else:
                values[row, k] = float(cell)
    if faults:
        kind, number, column = faults[0]
        same = {n for k, n, _ in faults if k == kind} - {number}
        further = {
            "same": sorted(same),
            "other": sorted({n for _, n, _ in faults} - same - {number}),
        }
        describe = _wrong_length if kind == "row" else _not_a_number
        raise describe(table, number, column, commas, further)
    return values


_PART = re.compile(r"[+-]?\d+|\d+e[+-]?\d+", re.IGNORECASE)  # of a number cut at its comma
_ALIKE = "Separate all lines alike: the first has {first}, this one has {this}."


def _wrong_length(table, number, column, _, further):
    count = len(table.columns)
    bare = without_comment(table.source.lines[number - 1]).rstrip()
    spans = spans_of(bare, table.delimiter)
    extra = len(spans) > count
    return table.source.fault(
        f"expected {count} values, found {len(spans)}",
        _length_remedy(table, number, bare),
        line=number,
        column=column,
        name=None if extra else str(table.columns[column - 1]),
        found=bare.strip(),
        span=(spans[count][0], spans[-1][1]) if extra else (len(bare), len(bare) + 1),
        **further,
    )


def _length_remedy(table, number, bare):
    count, delimiter = len(table.columns), table.delimiter
    cells = cells_of(bare, delimiter)
    if delimiter == "," and len(cells) > count and all(_PART.fullmatch(cell) for cell in cells):
        return (
            "Write decimal points, or separate all columns with semicolons:\n"
            "where commas separate, a decimal comma cuts a number in two."
        )
    for other, name in DELIMITERS.items():
        others = [cell.replace(",", ".") for cell in cells_of(bare, other)]
        if len(others) == count and all(NUMBER.fullmatch(cell) for cell in others):
            return _ALIKE.format(first=DELIMITERS[delimiter], this=name)
    if len(cells) > count and not any(cells[count:]):
        return "Remove the separator at the end of the row; it stands only between values."
    if len(cells) < count and bare != table.source.lines[number - 1].rstrip():
        return "Write the missing values; what follows # is a comment."
    return f"Write one value for each column: {', '.join(str(c) for c in table.columns)}."


def _not_a_number(table, number, column, commas, further):
    bare = without_comment(table.source.lines[number - 1])
    found = cells_of(bare, table.delimiter)[column - 1]
    decimal = re.fullmatch(r"[+-]?\d*,\d*(?:e[+-]?\d+)?", found, re.IGNORECASE)
    if table.delimiter is None and found.endswith(","):
        remedy = _ALIKE.format(first="blanks", this="commas")
    elif decimal and not commas:
        remedy = f"Write {found.replace(',', '.')}"
        thousands = re.fullmatch(r"[+-]?[1-9]\d{0,2},\d{3}", found)
        if thousands:
            remedy += (
                f" or {found.replace(',', '')}: the comma may be decimal or between thousands."
            )
        else:
            remedy += ": the file has decimal points too, and only one of the two can be meant."
    elif commas and NUMBER.fullmatch(found):
        remedy = f"Write {found.replace('.', ',')}: the file has decimal commas."
    else:
        remedy = number_remedy(found.replace(",", ".") if commas else found)
    return table.source.fault(
        f"expected a number, found {quoted(found)}",
        remedy,
        line=number,
        column=column,
        name=str(table.columns[column - 1]),
        found=found,
        span=spans_of(bare, table.delimiter)[column - 1],
        **further,
    )


# Values -----------------------------------------------------------------------------------------


_MASS = "Write the effective mass in electron masses, such as 0.067."
_BOUNDS = {  # column: (may be zero, what is expected, remedy)
    "thickness": (False, "a positive thickness", "Write the thickness, or remove the layer."),
    "m": (False, "a positive mass", _MASS),
    "m_end": (False, "a positive mass", _MASS),
    "sigma_V": (True, "0 or more", "Write the standard deviation of V, which has no sign."),
    "alpha": (
        True,
        "0 or more",
        "Write 0 or more: counting levels by nodes needs a mass that does not fall with energy.",
    ),
}


def _check_values(table, values):
    """Raise the first fault that only the numbers show."""
    names = [c.name for c in table.columns]
    if not len(values):
        raise table.source.fault(
            "expected rows below the header, found none",
            f"Write one row a line, with a number for each of: {', '.join(names)}.",
            line=table.first_line - 1,
        )
    for k, name in enumerate(names):
        if KINDS[name] != "text":
            remedy = "Write a number below 1e308, or remove the row."
            _raise_where(~np.isfinite(values[:, k]), table, k, "a finite number", remedy)
    for k, name in enumerate(names):
        if name == "x":
            _check_x(table, values[:, k], k)
        if name in _BOUNDS:
            zero, what, remedy = _BOUNDS[name]
            bad = values[:, k] < 0 if zero else values[:, k] <= 0
            _raise_where(bad, table, k, what, remedy)
        if name == "thickness":
            with np.errstate(over="ignore"):
                ends = np.cumsum(values[:, k])
            remedy = "Remove the layer: it changes no digit of the position where it ends."
            bad = np.concatenate([[False], ends[1:] <= ends[:-1]])
            _raise_where(bad, table, k, "a thickness that counts", remedy)


def _check_x(table, x, k):
    if x.size == 1:
        raise table.source.fault(
            "expected two rows or more, found one",
            "Add a row: V is known between rows only. For one layer, write a column thickness.",
            line=next(_rows(table))[0],
        )
    lower, equal = x[1:] < x[:-1], x[1:] == x[:-1]
    if lower.all():
        remedy = "Reverse the order of the rows: x descends throughout."
    else:
        remedy = "Put the row where its x belongs, or correct x."
    what = "x no less than in the row above"
    _raise_where(np.append(False, lower), table, k, what, remedy, above=True)
    third = np.append([False, False], equal[1:] & equal[:-1])
    remedy = "Keep two: a jump is the value on its left, then the value on its right, at one x."
    _raise_where(third, table, k, "at most two rows at one x", remedy, above=True)
    if x.size == 2:
        _raise_where(np.append(False, equal), table, k, "a second x", "Add a row at another x.")


def _raise_where(bad, table, k, what, remedy, above=False):
    rows = np.flatnonzero(bad)
    if not rows.size:
        return
    lines = np.fromiter((number for number, _ in _rows(table)), np.int64)
    number = int(lines[rows[0]])
    bare = without_comment(table.source.lines[number - 1])
    found = cells_of(bare, table.delimiter)[k]
    raise table.source.fault(
        f"expected {what}, found {quoted(found)}",
        remedy,
        line=number,
        column=k + 1,
        name=str(table.columns[k]),
        found=found,
        span=spans_of(bare, table.delimiter)[k],
        before=int(lines[rows[0] - 1]) if above else None,
        same=lines[rows[1:]].tolist(),
    )


# The profile ------------------------------------------------------------------------------------


def _profile(table, values, settings):
    column = {c.name: np.ascontiguousarray(values[:, k]) for k, c in enumerate(table.columns)}
    unit = {c.name: c.unit for c in table.columns}
    layers = is_layers(table.columns)
    units = Units(unit["thickness" if layers else "x"], unit["V"])
    for name in ("V_end", "sigma_V", "alpha"):
        if name in column:
            column[name] = _converted(column[name], unit[name], units.energy)
    column.pop("layer", None)
    keywords = settings | {"units": units}
    renamed = {"m": "mass", "m_end": "mass_end"}
    keywords |= {renamed.get(name, name): array for name, array in column.items()}
    try:
        return (Profile.from_layers if layers else Profile.from_rows)(**keywords)
    except InputError as fault:
        raise table.source.fault(
            str(fault), "Change the table or the settings above it."
        ) from fault


def _converted(values, unit, energy):
    """Convert an energy, or one over an energy, to the profile's unit of energy."""
    if unit.removeprefix("1/") == energy:
        return values
    if unit.startswith("1/"):
        return values * (energy_in_hartree(energy) / energy_in_hartree(unit[2:]))
    return values * (energy_in_hartree(unit) / energy_in_hartree(energy))
