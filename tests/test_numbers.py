"""Numbers from bytes: each the float that float() gives, wherever pieces of the file end."""

import hashlib
import io
import random
from decimal import Decimal, localcontext
from fractions import Fraction

import numpy as np
import pytest

from eigen1d import _numbers
from eigen1d._numbers import numbers


def read(text, count=2, delimiter=",", decimal="."):
    return numbers(io.BytesIO(text.encode()), count, delimiter, decimal, hashlib.sha256())


def doubts(cells):
    """How many of these cells the kernel leaves to float()."""
    text = "".join(f"{cell},0\n" for cell in cells).encode()
    array = np.frombuffer(text + b"\n" * 8, np.uint8)
    values, doubtful = np.empty((2, len(cells) + 1)), np.empty((2 * len(cells), 4), np.int64)
    marks = ord(","), ord(".")
    rows, found = _numbers.read_rows(array, len(text), *marks, _numbers._powers(), values, doubtful)
    assert rows == len(cells)
    return found


def assert_as_float(cells):
    found = read("".join(f"{cell},0\n" for cell in cells))[:, 0]
    expected = np.array([float(cell) for cell in cells])
    # As integers, to tell -0.0 from 0.0.
    wrong = np.flatnonzero(np.ascontiguousarray(found).view(np.int64) != expected.view(np.int64))
    assert not wrong.size, [(cells[k], found[k]) for k in wrong[:5]]


def random_float(rng):
    """Any finite positive float, subnormal ones included: all exponents are equally likely."""
    return float(np.uint64(rng.randrange(1, 0x7FF << 52)).view(np.float64))


def midpoint(value):
    """The number halfway to the next float, exactly, in decimal digits."""
    with localcontext(prec=1200):
        return (Decimal(value) + Decimal(float(np.nextafter(value, np.inf)))) / 2


# Rounding ---------------------------------------------------------------------------------------


@pytest.mark.parametrize("form", ["%r", "%.17g", "%.18e", "%.6g", "%.30e", "%.40f"])
def test_what_programs_write_is_rounded_right(form):
    """17 digits name one float: one bit off would be another table."""
    rng = random.Random(form)
    assert_as_float([form % (rng.choice((1, -1)) * random_float(rng)) for _ in range(3000)])
    assert_as_float([form % rng.gauss(0, 10.0 ** rng.randrange(-9, 20)) for _ in range(3000)])


def test_digits_at_random_are_rounded_right():
    """With points and exponents anywhere, more digits than an integer holds, and leading zeros."""
    rng = random.Random(1)

    def digits():
        return "".join(rng.choices("0123456789", k=rng.randrange(1, 30)))

    ends = ["", "e5", "E-7", "e+22", "e-22", "e23", "e-290", "e290", "e-320", "e310"]
    cells = [
        rng.choice(["", "-", "+"]) + rng.choice(["", "0", "000"]) + digits()
        + rng.choice(["", ".", "." + digits(), ".000" + digits()]) + rng.choice(ends)
        for _ in range(10000)
    ]  # fmt: skip
    assert_as_float(cells)
    assert_as_float(
        [f"{rng.getrandbits(rng.randrange(1, 65))}e{rng.randrange(-300, 300)}" for _ in cells]
    )


def test_halfway_between_two_floats_is_rounded_to_even():
    """Half the wrong ways to read a number differ from float() here alone."""
    rng = random.Random(2)
    for _ in range(200):
        exact = midpoint(random_float(rng))
        whole = int(exact.scaleb(-exact.as_tuple().exponent))
        exponent = exact.as_tuple().exponent
        assert_as_float(
            [f"{whole}e{exponent}", f"{whole}1e{exponent - 1}", f"{whole - 1}e{exponent}"]
            + [f"{whole}{'0' * 30}1e{exponent - 31}", f"{exact:.16e}", f"{exact:.18e}"]
        )


def test_ties_are_known_as_such():
    """The kernel must not think itself sure where no error, however small, can be allowed."""
    rng = random.Random(3)
    ties = [str(2 * rng.randrange(2**52, 2**53) + 1) for _ in range(100)]  # 54 bits, odd
    assert doubts(ties) == len(ties)
    assert_as_float(ties)
    assert doubts([f"{tie}.{'0' * 20}1" for tie in ties]) == len(ties)  # a tie but for digit 38


def test_what_programs_write_is_not_left_to_float():
    """One float() a cell would take ten times as long as the rest."""
    rng = random.Random(4)
    values = [rng.gauss(0, 10.0 ** rng.randrange(-30, 30)) for _ in range(20000)]
    for form in ("%r", "%.17g", "%.18e", "%.6g", "%.19f", "%.30e"):
        assert doubts([form % value for value in values]) <= 2, form
    # Of other digits, those past the 19th may be anything: 1e-18 or less of the number, where
    # floats are 1e-16 or more apart.
    cells = [f"0.{rng.randrange(10**24, 10**25)}" for _ in values]
    assert 0 < doubts(cells) < 0.03 * len(cells)


def test_pairs_are_powers_of_ten_to_106_bits():
    """All that the kernel is sure of rests on them."""
    powers = _numbers._powers()
    for e, (high, low) in enumerate(powers.tolist(), -_numbers._LARGEST):
        exact = Fraction(10) ** e
        assert abs(Fraction(high) + Fraction(low) - exact) <= exact / 2**106
    # The least bit of a product with a number of 19 digits is a float, so is the largest half.
    assert powers[0, 0] * 2.0**-106 >= np.finfo(float).tiny
    assert powers[-1, 0] * 1e19 * 2.0**28 < np.finfo(float).max


def test_edges_of_what_floats_are():
    """Named one by one, for no random number falls on them."""
    assert_as_float(
        "0 -0 +0.0 -0.000e5 0e999999999999999999999 1e400 -1e400 1e-400 -1e-400 1. .5 -.5e-3 00012 "
        "4.9e-324 2.4703282292062327e-324 2.4703282292062328e-324 2.2250738585072011e-308 "
        "2.2250738585072014e-308 1.7976931348623157e308 1.7976931348623158e308 "
        "1.7976931348623159e308 9007199254740991 9007199254740992 9007199254740993 "
        "9007199254740992.5 9007199254740993.0000000000000000001 9007199254740992e22 1e22 1e23 "
        "1e-22 1e-23 9e22 1e000000000000000000005 1e99999999999999999999 1e-18446744073709551616 "
        "1e18446744073709551617 9999999999999999999 18446744073709551615 18446744073709551616 "
        "99999999999999999999 1e270 1e271 1e-270 1e-271".split()
    )
    assert_as_float(["0." + "0" * 400 + "1e401", "1" + "0" * 400 + "e-400", "7" * 800, "0" * 50])


# Rows -------------------------------------------------------------------------------------------


def some_rows(rng, delimiter, decimal, end):
    """Rows with everything between them that is no fault, and their numbers."""
    values = [(rng.gauss(0, 1), 10.0 ** rng.randrange(-9, 9)) for _ in range(60)]
    text = []
    for row in values:
        cells = [repr(value).replace(".", decimal) for value in row]
        blanks = rng.choice(["", " ", "  ", "\t" if delimiter != "\t" else " "])
        text.append(blanks + ((delimiter or " ") + blanks).join(cells) + blanks)
        text.append(rng.choice(["", "", "# plain text, 1; 2", "#"]))
        text[-1] += rng.choice(["", end, end + "  " + end]) + end
    return "".join(text), values


@pytest.mark.parametrize("piece", [1, 9, 64, 200, 1 << 24])
@pytest.mark.parametrize("end", ["\n", "\r\n"])
@pytest.mark.parametrize(
    ("delimiter", "decimal"), [(",", "."), (";", ","), (";", "."), ("\t", ","), (None, ",")]
)
def test_rows_are_read_wherever_pieces_end(piece, end, delimiter, decimal, monkeypatch):
    """A file is cut anywhere; a number cut in two would be two numbers."""
    monkeypatch.setattr(_numbers, "_PIECE", piece)
    rng = random.Random(piece)
    text, values = some_rows(rng, delimiter, decimal, end)
    for content in (text, text.rstrip() + "  ", text + end * 3, text + "#"):
        digest = hashlib.sha256(b"head")
        found = numbers(io.BytesIO(content.encode()), 2, delimiter, decimal, digest)
        assert np.array_equal(found, values)
        assert digest.digest() == hashlib.sha256(b"head" + content.encode()).digest()
        assert found[:, 0].flags.c_contiguous


@pytest.mark.parametrize("piece", [9, 1 << 24])
@pytest.mark.parametrize(
    ("line", "delimiter"),
    [
        *(
            (line, ",")
            for line in ("1", "1,", ",1", "1,2,", "1,2,3", "1 2", "1;2", "1,2 3", "1,,2")
        ),
        *((line, ",") for line in ("a,1", "1,nan", "inf,1", "1,2\r3,4", "\r1,2", "1,2\v")),
        *((line, ",") for line in ("1,2 # a: b", "# left = wall", "1,2 # \xe9", "#\r1,2", "1,2\0")),
        *((line, None) for line in ("1-2", "1", "1 2 3", "1,2", "1+2", "1.5.5", "1\xa02", "1e5-3")),
        *((line, "\t") for line in ("1\t\t2", "1 2", "1,5\t2", "\t1\t2", "1\t2\t")),
    ],
)
def test_all_else_is_refused(line, delimiter, piece, monkeypatch):
    """What is no row of numbers is for the way by line, which can say why."""
    monkeypatch.setattr(_numbers, "_PIECE", piece)
    good = f"1{delimiter or ' '}2\n"
    for content in (good + line + "\n" + good, line + "\n" + good, good + line + "x", line + "#:"):
        assert read(content, 2, delimiter) is None
    assert read(good * 3, 2, delimiter).tolist() == [[1, 2]] * 3


def test_nothing_gives_no_rows():
    """A body may be missing, or nothing but empty lines."""
    assert read("").shape == read("\n \r\n\n").shape == read("# end").shape == (0, 2)
