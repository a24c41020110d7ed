"""What a fault in a table file looks like on the screen.

    graded_well.csv, line 14, column 2 (V [eV]): expected a number, found 'O.280'
        13 | 4.5, 0.280, 0.092
        14 | 5.0, O.280, 0.092
           |      ^^^^^
      Write a plain decimal number, such as 0.280 or 2.8e-1; this one begins with the letter O.
      The same fault is on lines 15 and 19. Nothing was computed.

The first line suffices alone. Lines and columns count from 1 as in an editor.
"""

import re
from collections.abc import Callable
from dataclasses import dataclass
from difflib import get_close_matches
from functools import cached_property

from .errors import TableError

_LISTED = 5  # lines named one by one; the others are counted
_WIDTH = 80  # characters of a source line that are shown: a line of the screen

# What the C parser of numpy reads, so that both ways through a file accept the same text. float()
# would not do: it takes 1_000 and digits of other scripts.
NUMBER = re.compile(
    r"[+-]?(?:(?:\d+\.?\d*|\.\d+)(?:e[+-]?\d+)?|nan|inf|infinity)", re.ASCII | re.IGNORECASE
)


@dataclass(frozen=True)
class Source:
    """A file as the user named it, and how to get its bytes, which become text if they must."""

    path: str
    read: Callable = bytes
    encoding: str = "utf-8-sig"

    @cached_property
    def lines(self):
        """list of str: the lines; `lines[0]` is line 1."""
        return with_plain_newlines(self.read().decode(self.encoding)).split("\n")

    def fault(
        self,
        what,
        remedy,
        *,
        line=None,
        column=None,
        name=None,
        found=None,
        span=None,
        before=None,
        same=(),
        other=(),
    ):
        """Return the TableError that describes one fault.

        Parameters
        ----------
        what, remedy : str
            What was expected and found; what to write instead.
        line, column, name, found
            As for `TableError`.
        span : (int, int), optional
            Characters of the line to mark.
        before : int, optional
            The other line worth seeing; default: the one above.
        same : sequence of int, optional
            Further lines with the same fault.
        other : sequence of int, optional
            Lines with faults of another kind.
        """
        place = f"{_printable(self.path)}"
        if line is not None:
            place += f", line {line}"
        if column is not None:
            place += f", column {column}" + (f" ({_cut(name)})" if name else "")
        text = [f"{place}: {what}"]
        if line is not None:
            text += self._excerpt(line, line - 1 if before is None else before, span)
        text += [f"  {sentence}" for sentence in remedy.split("\n")]
        further = [f"The same fault is on {_listed(same)}."] if same else []
        if other:
            verb = "Another fault is" if len(other) == 1 else "Other faults are"
            further.append(f"{verb} on {_listed(other)}.")
        if further:
            text.append(f"  {' '.join(further)} Nothing was computed.")
        return TableError("\n".join(text), self.path, line, column, name, found)

    def _excerpt(self, line, before, span):
        gutter = len(str(line))
        text = self.lines[line - 1]
        start, end = span or (len(text) - len(text.lstrip()), len(text.rstrip()))
        shown = [before] if before > 0 and self.lines[before - 1].strip() else []
        # A line longer than the screen is shown around the fault.
        first = 0 if end <= _WIDTH else max(0, start - _WIDTH // 3)
        excerpt = [
            f"    {number:>{gutter}} | {_printable(self.lines[number - 1][first : first + _WIDTH])}"
            for number in [*shown, line]
        ]
        marks = max(1, min(end - start, first + _WIDTH - start))
        return [
            *(row.rstrip() for row in excerpt),
            f"    {'':>{gutter}} | {'':>{start - first}}{'^' * marks}",
        ]


def with_plain_newlines(text):
    """Return the text with "\\n" alone between lines."""
    return text.replace("\r\n", "\n").replace("\r", "\n")


def quoted(found):
    """Return the text that was found, in quotes, cut if long, without control characters."""
    return f"'{_cut(found)}'"


def nearest(word, known, also=()):
    """Return the word of `known` that was probably meant, or None.

    `also` maps other spellings, in lower case, to known ones. A word without difference but of case
    is the first choice.
    """
    lower = word.lower()
    by_case = {k.lower(): k for k in known}
    found = by_case.get(lower) or dict(also).get(lower)
    close = get_close_matches(lower, by_case, 1, 0.6)
    return found or (by_case[close[0]] if close else None)


def number_remedy(found):
    """Return the sentence that says what to write instead of text where a number belongs.

    Examples
    --------
    >>> number_remedy("1.0D-3")
    'Write 1.0e-3: the exponent is marked by e, not by D.'
    """
    plain = "Write a plain decimal number, such as 0.280 or 2.8e-1"
    if not found:
        return "Write the missing number; an empty place is not taken as 0."
    for pattern, replacement, sentence in _MISTAKES if len(found) < 40 else ():
        fixed = re.sub(pattern, replacement, found)
        if fixed != found and NUMBER.fullmatch(fixed):
            letter = re.search(pattern, found)
            where = "begins with" if letter.start() == 0 else "contains"
            return sentence.format(plain=plain, fixed=fixed, where=where, letter=letter[0])
    return f"{plain}."


# (what, what to put there, remedy if that makes a number)
_MISTAKES = (
    (
        "\N{MINUS SIGN}",
        "-",
        "Write {fixed} with a hyphen; this one has the minus sign U+2212.",
    ),
    (
        r"(?<=[\d.])[dD](?=[+-]?\d)",
        "e",
        "Write {fixed}: the exponent is marked by e, not by {letter}.",
    ),
    ("[Oo]", "0", "{plain}; this one {where} the letter {letter}."),
    ("[lI]", "1", "{plain}; this one {where} the letter {letter}."),
    ("[\"']", "", "Write {fixed}, without quotation marks."),
    (
        "(?<=\\d)[ '_\N{RIGHT SINGLE QUOTATION MARK}\N{NO-BREAK SPACE}\N{THIN SPACE}"
        "\N{NARROW NO-BREAK SPACE}](?=\\d{3})",
        "",
        "Write {fixed}, with nothing between the thousands.",
    ),
    (r"(?<=[\d.])\s*[^\W\d][^\d]*$", "", "Write {fixed} alone; a unit belongs in the header."),
)


def _listed(lines):
    head = [str(line) for line in lines[:_LISTED]]
    rest = len(lines) - len(head)
    if rest:
        head.append(f"{rest} more line" + "s" * (rest > 1))
    if len(head) == 1:
        return f"line {head[0]}"
    return f"lines {', '.join(head[:-1])} and {head[-1]}"


def _cut(text, width=36):
    return _printable(text if len(text) <= width else text[: width - 3] + "...")


def _printable(text):
    text = text.replace("\t", " ")  # one character wide, so that the marks stand below the fault
    return "".join(c if c.isprintable() else "\N{REPLACEMENT CHARACTER}" for c in text)
