"""Numbers of a large table, straight from the bytes of its file, each rounded as float() does.

A decimal number is w 10^e with whole w. Where both w and 10^|e| are floats without error, one
product or quotient is the nearest float to it [1]_. Elsewhere w 10^e is computed to 100 bits from
pairs of floats [2]_; if all numbers within the error of that round to one float, it is the nearest
[3]_. What is left, such as a number halfway between two floats, is given to float() itself. Digits
are read eight at a time, as bytes of one integer [4]_.

References
----------
.. [1] W. D. Clinger, How to read floating point numbers accurately, PLDI (1990) 92.
.. [2] T. J. Dekker, Numer. Math. 18 (1971) 224.
.. [3] A. Ziv, ACM Trans. Math. Softw. 17 (1991) 410.
.. [4] D. Lemire, Number parsing at a gigabyte per second, Softw. Pract. Exper. 51 (2021) 1700.
"""

import os
import re
from collections import deque
from concurrent.futures import ThreadPoolExecutor
from fractions import Fraction

import numpy as np
from numba import types

from ._compiled import kernel

_PIECE = 1 << 24  # bytes that a thread turns into numbers at a time
_THREADS = min(3, os.cpu_count() or 1)  # more would wait: the digest keeps up with three
_DIGITS = 19  # most of w: every whole number of 19 digits is less than 2^64
_EXACT = 22  # 10^22 is the last power of ten that is a float
_LARGEST = 270  # of |e|: w 10^e and the last bits of its pair are then normal floats
_BEYOND = 1 << 30  # in place of an exponent of ten digits or more
_HALF = 2.0**27 + 1.0  # times a float, it cuts the float into two halves of 26 bits
_ERROR = 2.0**-100  # relative, of w 10^e from pairs: at most 12 roundings of 2^-106 each
_BEHIND = b"\n" * 8  # a last line must have an end, and eight bytes at a time must be there
_TENS = 10 ** np.arange(9, dtype=np.uint64)
# Eight bytes in one integer of 64 bits.
_ZEROS, _LOW_BITS, _TO_128, _HIGH_BITS = (
    np.uint64(byte * 0x0101010101010101) for byte in (ord("0"), 127, 128 - 10, 128)
)
_COUNTS = np.uint64(0x0001020304050607)  # its highest byte, if multiplied by 256^count: count
_PAIRS = np.uint64(0x000000FF000000FF)
_WEIGHTS_1_3 = np.uint64((1000000 << 32) + 100)
_WEIGHTS_2_4 = np.uint64((10000 << 32) + 1)
_NEWLINE, _RETURN, _TAB, _BLANK, _PLUS, _MINUS, _ZERO, _E, _SHARP = b"\n\r\t +-0e#"
# What surely is nothing but a comment: plain text, without the colon or equals sign of a setting.
_COMMENT = re.compile(rb"#[\t -9;<>-~]*(?=\r?\n)")


def _powers():
    """Powers of ten from 10^-_LARGEST on, as pairs of floats whose sum is right to 106 bits."""
    exact = [Fraction(10) ** e for e in range(-_LARGEST, _LARGEST + 1)]
    return np.array([(float(power), float(power - Fraction(float(power)))) for power in exact])


def numbers(file, count, delimiter, decimal, digest):
    """Read rows of numbers, from where a file stands to its end.

    Parameters
    ----------
    file : binary file
    count : int
        Numbers in a row.
    delimiter : str or None
        What stands between them; None for blanks.
    decimal : str
        "." or ",".
    digest : hash object
        It is updated with the bytes that are read.

    Returns
    -------
    ndarray, shape (rows, count), or None
        Each column in one piece. None if there is anything but numbers, blanks, empty lines and
        plain comments, such as a fault, nan, a setting, or "\\r" alone at the end of a line.

    Examples
    --------
    >>> import hashlib, io
    >>> numbers(io.BytesIO(b"0,0; 0,28\\n5,0; 5e-1"), 2, ";", ",", hashlib.sha256())
    array([[0.  , 0.28],
           [5.  , 0.5 ]])
    """
    arguments = count, delimiter, decimal, _powers()
    parts, running = deque(), deque()
    with ThreadPoolExecutor(_THREADS) as threads:
        for text, stop in _pieces(file):
            running.append(threads.submit(_part, text, stop, *arguments))
            digest.update(text[:stop])  # beside the threads
            if len(running) > _THREADS:
                parts.append(running.popleft().result())
                if parts[-1] is None:
                    return None
        parts.extend(part.result() for part in running)
    if any(part is None for part in parts):
        return None
    values = np.empty((count, sum(part.shape[1] for part in parts)))
    end = 0
    while parts:  # each part makes room for its copy
        part = parts.popleft()
        values[:, end : end + part.shape[1]] = part
        end += part.shape[1]
    return values.T


def _pieces(file):
    """Yield a file piece by piece: text, and how many of its bytes are the lines to be read."""
    while piece := file.read(_PIECE):
        stop = piece.rfind(b"\n", 0, -len(_BEHIND)) + 1
        if stop:
            file.seek(stop - len(piece), os.SEEK_CUR)  # to copy the rest would take longer
        else:
            piece += file.readline()
            stop = len(piece)
            piece += _BEHIND
        yield np.frombuffer(piece, np.uint8), stop


def _part(text, stop, *arguments):
    """Return the numbers of some lines, shape (count, rows), or None as `numbers` does."""
    values = _without_comments(text, stop, *arguments)
    if values is None and _SHARP in text[:stop]:
        bare = _COMMENT.sub(b"", text[:stop].tobytes() + _BEHIND)
        stop = len(bare) - len(_BEHIND)
        values = _without_comments(np.frombuffer(bare, np.uint8), stop, *arguments)
    return values


def _without_comments(text, stop, count, delimiter, decimal, powers):
    """Return the same of lines that have no comments."""
    lines = np.count_nonzero(text[:stop] == _NEWLINE) + 1
    values = np.empty((count, lines))
    doubtful = np.empty((count * lines, 4), np.int64)
    marks = ord(delimiter or " "), ord(decimal)
    rows, doubts = read_rows(text, stop, *marks, powers, values, doubtful)
    for column, row, first, last in doubtful[:doubts].tolist():
        values[column, row] = float(text[first:last].tobytes().replace(decimal.encode(), b"."))
    return None if rows < 0 else values[:, :rows]


# Kernels ----------------------------------------------------------------------------------------


@kernel
def _byte(text, at):
    return text[np.uintp(at)]  # an index without sign is not tested for it: 32 -> 24 ns a number


@kernel
def _after_blanks(text, at, delimiter):
    while _byte(text, at) == _BLANK or (_byte(text, at) == _TAB and delimiter != _TAB):
        at += 1
    return at


@kernel
def _number(text, at, decimal):
    """Read one number up to its end.

    Returns
    -------
    at : int
        Where it ends, or -1 if there is no number.
    whole, exponent
        The number without its sign is whole 10^exponent ...
    cut : bool
        ... or, if its last digits were cut, less than (whole + 1) 10^exponent.
    """
    none = -1, np.uint64(0), 0, False
    if _byte(text, at) == _PLUS or _byte(text, at) == _MINUS:
        at += 1
    start = at
    first = at = _after_zeros(text, at)
    at, whole = _digits(text, at, np.uint64(0))
    digits, written, exponent = at - first, at - start, 0
    if _byte(text, at) == decimal:
        point = at + 1
        at = point
        if digits == 0:
            first = at = _after_zeros(text, at)
        before = at
        at, whole = _digits(text, at, whole)
        digits += at - before
        written += at - point
        exponent = point - at
    if written == 0:
        return none
    cut = digits > _DIGITS
    if cut:
        exponent += digits - _DIGITS
        whole = _first_digits(text, first, decimal)
    if _byte(text, at) | 32 == _E:
        at += 1
        negative = _byte(text, at) == _MINUS
        if negative or _byte(text, at) == _PLUS:
            at += 1
        first = at
        at, size = _digits(text, at, np.uint64(0))
        if at == first:
            return none
        size = np.int64(size) if at - first < 10 else _BEYOND
        exponent += -size if negative else size
    return at, whole, exponent, cut


@kernel
def _after_zeros(text, at):
    while _byte(text, at) == _ZERO:
        at += 1
    return at


@kernel
def _digits(text, at, whole):
    """Append digits to a whole number; it is wrong, and to be thrown away, where they are many."""
    while True:
        word = _word(text, at) ^ _ZEROS  # a digit becomes its value, any other byte more than 9
        others = (((word & _LOW_BITS) + _TO_128) | word) & _HIGH_BITS  # high bits of what is more
        if others != 0:
            break
        whole = whole * _TENS[8] + _of_eight(word)
        at += 8
    first = (others & (~others + _TENS[0])) >> 7  # 256^count for count digits before the others
    count = (first * _COUNTS) >> 56
    if count != 0:
        word <<= np.uint64(64) - (count << 3)  # away with the others: before the digits come zeros
        whole = whole * _TENS[count] + _of_eight(word)
        at += np.int64(count)
    return at, whole


@kernel
def _word(text, at):
    """Eight bytes as one integer, the first one lowest; the compiler makes it one instruction."""
    word = np.uint64(0)
    for k in range(8):
        word |= np.uint64(_byte(text, at + k)) << (8 * k)
    return word


@kernel
def _of_eight(word):
    """The whole number whose decimal digits are the bytes of an integer, the lowest one first."""
    word = word * _TENS[1] + (word >> 8)  # every other byte: a number of two digits
    return ((word & _PAIRS) * _WEIGHTS_1_3 + ((word >> 16) & _PAIRS) * _WEIGHTS_2_4) >> 32


@kernel
def _first_digits(text, at, decimal):
    """The whole number of the first digits, as many as it can have, of more than that."""
    whole, digits = np.uint64(0), 0
    while digits < _DIGITS:
        if _byte(text, at) != decimal:
            whole = whole * np.uint64(10) + np.uint64(_byte(text, at) - _ZERO)
            digits += 1
        at += 1
    return whole


@kernel
def _nearest(whole, exponent, cut, powers):
    """The float nearest to whole 10^exponent, or to a number up to one unit of whole above.

    Returns
    -------
    value : float
    sure : bool
        If not, value is no result.
    """
    if whole == 0 and not cut:
        return 0.0, True
    if not -_LARGEST <= exponent <= _LARGEST:
        return 0.0, False
    if whole <= np.uint64(1 << 53) and -_EXACT <= exponent <= _EXACT and not cut:
        if exponent < 0:
            return np.float64(whole) / powers[_LARGEST - exponent, 0], True
        return np.float64(whole) * powers[_LARGEST + exponent, 0], True
    # whole = a + b and 10^exponent = p + q; the product is high + low.
    a = np.float64(whole)
    b = np.float64(np.int64(whole - np.uint64(a)))  # a difference below 0 wraps twice, to itself
    p, q = powers[_LARGEST + exponent, 0], powers[_LARGEST + exponent, 1]
    a1 = a * _HALF
    a1 -= a1 - a
    a2 = a - a1
    p1 = p * _HALF
    p1 -= p1 - p
    p2 = p - p1
    high = a * p
    low = ((a1 * p1 - high) + a1 * p2 + a2 * p1) + a2 * p2 + (a * q + b * p)
    error = _ERROR * high
    value = high + (low - error)
    return value, value == high + (low + error + (p if cut else 0.0))


_TEXT = types.Array(types.uint8, 1, "C", readonly=True)


@kernel(
    entry=True,
    signature=types.UniTuple(types.int64, 2)(
        _TEXT,
        types.int64,
        types.int64,
        types.int64,
        types.float64[:, ::1],
        types.float64[:, :],
        types.int64[:, ::1],
    )
)
def read_rows(text, stop, delimiter, decimal, powers, values, doubtful):
    """Read lines.

    Parameters
    ----------
    text : ndarray of uint8
    stop : int
        Bytes to be read: whole lines, and eight more bytes behind. If the last line has no newline
        yet, it is the first of those.
    delimiter, decimal : int
        The bytes between numbers (a blank stands for any blanks) and before decimals.
    powers : ndarray
        As from `_powers`.
    values : ndarray, shape (count, lines)
        Result: the rows, empty lines left out.
    doubtful : ndarray of int64, shape (count times lines, 4)
        Result: column and row of numbers that `values` does not have, their place in the text.

    Returns
    -------
    rows, doubts : int
        How many there are; rows is -1 if a line is neither empty nor `count` numbers.
    """
    count = values.shape[0]
    at, row, doubts = 0, 0, 0
    while at < stop:
        at = _after_blanks(text, at, delimiter)
        if _byte(text, at) != _NEWLINE and _byte(text, at) != _RETURN:
            for column in range(count):
                first = at = _after_blanks(text, at, delimiter)
                at, whole, exponent, cut = _number(text, at, decimal)
                if at < 0:
                    return -1, doubts
                value, sure = _nearest(whole, exponent, cut, powers)
                values[column, row] = -value if _byte(text, first) == _MINUS else value
                if not sure:
                    doubtful[doubts, 0], doubtful[doubts, 1] = column, row
                    doubtful[doubts, 2], doubtful[doubts, 3] = first, at
                    doubts += 1
                last = at
                at = _after_blanks(text, at, delimiter)
                if column < count - 1:
                    if delimiter != _BLANK and _byte(text, at) == delimiter:
                        at += 1
                    elif delimiter != _BLANK or at == last:
                        return -1, doubts
            row += 1
        if _byte(text, at) == _RETURN:
            at += 1
        if _byte(text, at) != _NEWLINE:
            return -1, doubts
        at += 1
    return row, doubts
