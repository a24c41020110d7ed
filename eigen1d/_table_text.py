"""From a path to the text of a table file: anything that is no UTF-8 text is explained."""

import os
from difflib import get_close_matches

from ._table_faults import Source, with_plain_newlines


def read_bytes(path):
    """Return the bytes of a file, or raise TableError with what to name instead."""
    source = Source(path)
    try:
        with open(path, "rb") as file:
            return file.read()
    except FileNotFoundError:
        folder, name = os.path.split(path)
        there = os.listdir(folder or ".") if os.path.isdir(folder or ".") else []
        close = get_close_matches(name, there, 1)
        meant = close and f"Did you mean {os.path.join(folder, close[0])}?"
        raise source.fault(
            "there is no such file", meant or "Check the name and the folder."
        ) from None
    except IsADirectoryError:
        tables = sorted(name for name in os.listdir(path) if name.endswith(".csv"))
        inside = os.path.join(path, tables[0] if tables else "profile.csv")
        raise source.fault(
            "is a folder, a file was expected", f"Name a file in it, such as {inside}."
        ) from None
    except (OSError, ValueError) as fault:
        reason = getattr(fault, "strerror", None) or fault
        raise source.fault(
            f"cannot be read: {reason}", "Name a file that exists and that you may read."
        ) from None


# Bytes that no text has; escape (27) is left out, for it changes colours in logs.
_CONTROL = bytes({*range(9), *range(14, 32)} - {27})
_MAGIC = {
    b"PK\x03\x04": ("a spreadsheet or a zip archive", "Export the sheet as CSV text (UTF-8)."),
    b"\x1f\x8b": ("a gzip archive", "Unpack it first, with gunzip."),
    b"%PDF": ("a PDF document", "Copy its table to a text file."),
    b"\x89HDF": ("an HDF5 file", "Export the columns x and V as CSV text."),
}


def text_source(path, data):
    """Return the Source of a file's bytes: text in UTF-8, with or without a byte order mark."""
    source = Source(path, lambda: data)
    for magic, (what, remedy) in _MAGIC.items():
        if data.startswith(magic):
            raise source.fault(f"expected a text table, found {what}", remedy)
    utf8 = "Save it as UTF-8, or convert it with iconv -t UTF-8 -f"
    if data.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise source.fault("expected text in UTF-8, found UTF-16", f"{utf8} UTF-16.")
    if len(data.translate(None, _CONTROL)) < len(data):  # 4 times as fast as a regular expression
        raise source.fault(
            "expected a text table, found a binary file", "Export the columns x and V as CSV text."
        )
    try:
        data.decode(source.encoding)
    except UnicodeDecodeError as fault:
        before = with_plain_newlines(data[: fault.start].decode("latin-1"))
        start = len(before) - before.rfind("\n") - 1
        found = f"0x{data[fault.start]:02x}"
        # Latin-1 gives every byte a character, so the line can be shown.
        raise Source(path, lambda: data, "latin-1").fault(
            f"expected text in UTF-8, found the byte {found}",
            f"{utf8} LATIN1 if the line above reads right.",
            line=before.count("\n") + 1,
            found=found,
            span=(start, start + 1),
        ) from None
    return source
