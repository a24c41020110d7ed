"""The command line: parses, calls, prints; computes nothing.

    eigen1d levels FILE     every bound level of a table, with its bracket, as table, JSON, CSV
    eigen1d draw FILE       a picture of V(x) with each level and its wave function

Results go to stdout, messages to stderr. Exit status: 0 done; 2 the input or the call is wrong;
3 a check failed; 1 a fault of the program.
"""

import argparse
import dataclasses
import json
import math
import os
import re
import shlex
import sys
import traceback

from . import _files
from .errors import CheckError, InputError, TableError

VERSION = sys.modules[__package__].__version__
DESCRIPTION = """\
Every bound level of a one-dimensional potential, none missed, each in a two-sided bracket."""
_ELSEWHERE = "Send it where there is room, or read the levels from --json FILE."
STATUSES = """\
exit status: 0 done; 2 the input or the call is wrong; 3 a check failed; 1 a fault of the program"""


def main(argv=None):
    """Run one command and return its exit status.

    Parameters
    ----------
    argv : sequence of str, optional
        Default: what stands on the command line.

    Returns
    -------
    int
        0 done; 2 the input or the call is wrong; 3 a check failed; 1 a fault of the program.

    Examples
    --------
    >>> main(["--version"])
    eigen1d 0.1.0
    0
    """
    try:
        _run(argv)
    except BrokenPipeError:  # whoever read our output has seen enough
        _abandon(sys.stdout)
    except InputError as fault:
        return _complain(f"error: {fault}", 2)
    except CheckError as fault:
        return _complain(f"check failed: {fault}", 3)
    except KeyboardInterrupt:
        return _complain("interrupted", 130)
    except Exception:
        traceback.print_exc()
        return _complain(
            "this is a fault of the program, not of your input.\n"
            "  Please report it with the lines above and the table.",
            1,
        )
    return 0


def _run(argv):
    try:
        args = _parser().parse_args(argv)
    except SystemExit:  # --help and --version have had their say, if it can be written
        _say(end="")
    else:
        args.run(args)


# The words ---------------------------------------------------------------------------------------


class _Parser(argparse.ArgumentParser):
    """An argument parser whose errors are InputErrors, and which knows negative energies."""

    def __init__(self, *args, **keywords):
        super().__init__(*args, allow_abbrev=False, **keywords)
        # argparse takes "-1e-3" for an option, and has no public way to say otherwise.
        self._negative_number_matcher = re.compile(r"-(\d+\.?\d*|\.\d+)(e[-+]?\d+)?$", re.I)

    def error(self, message):
        raise InputError(f"{message}\n  {self.prog} --help shows what can be written.")


def _parser():
    parser = _Parser(prog="eigen1d", description=DESCRIPTION, epilog=STATUSES)
    parser.add_argument("--version", action="version", version=f"eigen1d {VERSION}")
    commands = parser.add_subparsers(metavar="COMMAND", required=True)
    levels = commands.add_parser(
        "levels", help="print every bound level of a table", epilog=STATUSES,
        description="Print every bound level of a table, with its bracket.",
    )  # fmt: skip
    draw = commands.add_parser(
        "draw", help="draw V(x) with its levels and wave functions", epilog=STATUSES,
        description="Draw V(x) with each level at its energy and its wave function on it.",
    )  # fmt: skip
    for command in (levels, draw):
        _add_common(command)
    levels.set_defaults(run=_levels, output=None)
    draw.add_argument(
        "--output", "-o", metavar="FILE",
        help="the picture: PNG, PDF or SVG by its suffix (default: the table's name with .png, in "
        "the working folder)",
    )  # fmt: skip
    draw.add_argument("--density", action="store_true", help="draw psi^2 instead of psi")
    draw.set_defaults(run=_draw)
    return parser


def _add_common(command):
    add = command.add_argument
    add("file", metavar="FILE", help="a table of rows or of layers")
    add("--count", type=_count, metavar="N", help="how many levels, lowest first (default: all)")
    add("--window", type=_number, nargs=2, metavar=("LOW", "HIGH"),
        help="all levels between two energies, in the table's unit of energy")  # fmt: skip
    add("--method", type=_one_of("method"), default="shooting", metavar="NAME",
        help="shooting (default) or finite-difference")  # fmt: skip
    add("--no-cross-check", action="store_true", help="do not solve by the other method too")
    for option, metavar in (("interpolation", "NAME"), ("left", "EDGE"), ("right", "EDGE")):
        add(f"--{option}", type=_one_of(option), metavar=metavar, help=_either(_CHOICES[option]))
    add("--columns", metavar="NAMES", help="for a file without a header, such as x,V,m")
    add("--units", metavar="UNITS", help="units of length and energy for --columns: nm,eV")
    add("--json", metavar="FILE", help="write the levels as JSON; - is stdout")
    add("--csv", metavar="FILE", help="write one row a level")
    add("--states", metavar="FILE", help="write V and the wave functions, one row a position")


# As the modules have them; to import those here would make --help wait for numpy.
_CHOICES = {
    "method": ("shooting", "finite-difference"),
    "interpolation": ("linear", "step", "smooth", "monotone"),
    "left": ("open", "wall"),
    "right": ("open", "wall"),
}


def _one_of(option):
    def word(text):
        if text in _CHOICES[option]:
            return text
        raise argparse.ArgumentTypeError(f"expected {_either(_CHOICES[option])}, found {text!r}")

    return word


def _either(words):
    return f"{', '.join(words[:-1])} or {words[-1]}"


def _count(text):
    try:
        count = int(text)
    except ValueError:
        count = 0
    if count < 1:
        raise argparse.ArgumentTypeError(f"expected a whole number from 1, found {text!r}")
    return count


def _number(text):
    try:
        return float(text)
    except ValueError:
        raise argparse.ArgumentTypeError(f"expected a number, found {text!r}") from None


# The commands ------------------------------------------------------------------------------------


def _levels(args):
    levels = _solved(args)
    _write(args, levels)
    words = _words(args, levels)
    if args.json == "-":
        _say(*words, aside=True)
    else:
        table = [*_table(levels), ""] if len(levels) else []
        _say(*_heading(levels.profile), "", *table, *words)


def _draw(args):
    if args.output is None:
        name = os.path.basename(os.path.normpath(args.file))
        args.output = os.path.splitext(name)[0] + ".png"
    from . import draw

    draw.check_suffix(args.output)
    levels = _solved(args)
    figure = draw.draw(levels, density=args.density)
    _write(args, levels)
    draw.save(figure, args.output, inputs=[args.file])
    _say(*_words(args, levels), aside=args.json == "-")
    _say(f"wrote {args.output}", aside=True)


def _tell_of_compiling():
    """Half a minute without a word looks like a fault, on a terminal."""
    from ._compiled import FIRST_START

    if FIRST_START and sys.stderr.isatty():
        print("compiling the solver for this machine, once; half a minute ...", file=sys.stderr)


def _solved(args):
    """Read, check every output, solve: nothing is written before all of that went well."""
    from .tables import read_profile

    if args.file == "-":
        raise InputError("-: standard input is read under its name\n  Write /dev/stdin instead.")
    if args.count is not None and args.window is not None:
        raise InputError(
            "--count and --window exclude each other\n"
            "  Leave one out: --window lists all levels in it."
        )
    _check_outputs(args)
    try:
        profile = read_profile(
            args.file, interpolation=args.interpolation, left=args.left, right=args.right,
            columns=args.columns, units=args.units,
        )  # fmt: skip
    except TableError:
        raise
    except InputError as fault:
        raise InputError(_in_options(str(fault))) from None
    # As a name of the package, not of the module: see eigen1d/__init__.py.
    _tell_of_compiling()
    from . import solve

    levels = solve(
        profile, count=args.count, window=args.window, method=args.method,
        cross_check=not args.no_cross_check,
    )  # fmt: skip
    if args.count is not None and len(levels) < args.count:
        exist = _counted(len(levels), "bound level")
        remedy = f"Write --count {len(levels)}, or leave" if len(levels) else "Leave"
        raise InputError(
            f"{args.file}: --count {args.count} asks for more levels than exist: {exist}\n"
            f"  {remedy} --count out for all there are."
        )
    return levels


def _in_options(text):
    """Return a message with Python's columns='x,V' as the --columns x,V of the command line."""
    return re.sub(
        r"\b(columns|units)=(['\"])(.*?)\2", lambda m: f"--{m[1]} {shlex.quote(m[3])}", text
    )


def _check_outputs(args):
    """Raise `InputError` for an output that cannot be written, before anything is computed."""
    outputs = {
        name: path
        for name in ("json", "csv", "states", "output")
        if (path := getattr(args, name)) is not None
    }
    if outputs.get("json") == "-":
        del outputs["json"]
    places = {}
    for name, path in outputs.items():
        if not path:
            raise InputError(f"--{name}: expected the name of a file, found an empty one")
        if path == "-":
            raise InputError(f"--{name} -: only --json can go to stdout; name a file")
        place = os.path.realpath(path)
        if place in places:
            raise InputError(
                f"--{places[place]} and --{name} both name {path}; each needs a file of its own"
            )
        places[place] = name
        _check_writable(path, place, args.file)


def _check_writable(path, place, table):
    try:
        _files._check(path, place, [table])
        if os.access(place if os.path.exists(place) else os.path.dirname(place), os.W_OK):
            return
        reason = "no permission to write there"
    except OSError as fault:
        reason = fault.strerror
    raise InputError(f"{path}: cannot be written: {reason}\n  Name a file in a folder of yours.")


def _write(args, levels):
    inputs = [args.file]
    if args.csv is not None:
        levels.to_csv(args.csv, inputs)
    if args.states is not None:
        from .draw import positions

        levels.states_to_csv(args.states, positions(levels), inputs)
    if args.json is not None:
        text = json.dumps(levels.to_dict(), indent=2, allow_nan=False) + "\n"
        if args.json == "-":
            _say(text, end="")
        else:
            _files.write_whole(args.json, text, inputs)


# What is printed ---------------------------------------------------------------------------------


def _heading(profile):
    name = profile.title or os.path.basename(profile.source)
    edges = f"left edge {profile.left.kind}, right edge {profile.right.kind}"
    given = _counted(profile.row_count, "row" if profile.kind == "rows" else "layer")
    return [name, f"{given}, {_counted(profile.cells, 'cell')}; {edges}"]


def _table(levels):
    """Lines of the table of levels, with units in its header."""
    energy, length = levels.profile.units.energy, levels.profile.units.length
    budget = levels.budget
    # Noise cuts no digits: it tells how far to trust the table, they tell what the table gives.
    exact = dataclasses.replace(budget, noise=None)
    columns = [
        ("n", [str(n) for n in levels.n]),
        (f"energy [{energy}]", _numbers(levels.energy, exact.total)),
        (f"bracket +- [{energy}]", [f"{half:.1e}" for half in budget.numeric]),
    ]
    for name, term in (("cross-check", budget.method), ("noise +-", budget.noise)):
        if term is not None:
            columns.append((f"{name} [{energy}]", [f"{size:.1e}" for size in term]))
    spread = levels.spread_x
    columns += [
        (f"<x> [{length}]", _numbers(levels.mean_x, spread * 1e-4, spread.max())),
        (f"spread [{length}]", _numbers(spread, spread * 1e-4)),
    ]
    aligned = []
    for head, cells in columns:
        width = max(map(len, [head, *cells]))
        aligned.append([cell.rjust(width) for cell in [head, *cells]])
    return ["  ".join(line) for line in zip(*aligned, strict=True)]


def _numbers(values, uncertainties, size=0.0):
    """Numbers whose last digit is no finer than their uncertainty, aligned at the decimal point.

    With exponents where the largest of them, or `size`, would need too many digits without.
    """
    size = max(abs(values).max(), size)
    if size != 0 and not 1e-3 <= size < 1e7:
        return [
            f"{v:.{_digits(u / 10.0 ** math.floor(math.log10(abs(v))), 1.0) if v else 0}e}"
            for v, u in zip(values, uncertainties, strict=True)
        ]
    digits = [_digits(u, v) for v, u in zip(values, uncertainties, strict=True)]
    most = max(digits)
    cells = []
    for v, d in zip(values, digits, strict=True):
        text = f"{round(v, d) + 0.0:.{d}f}"  # + 0.0: no minus before a zero
        # A number without decimals also lacks the point that the others have.
        cells.append(text + " " * (most - d + (most > 0 and d == 0)))
    return cells


def _digits(uncertainty, value):
    """How many decimals a number with this uncertainty may show."""
    if not uncertainty > 0:  # nothing known: what a float holds
        uncertainty = math.ulp(value)
    return min(max(math.floor(-math.log10(uncertainty)), 0), 17)


def _words(args, levels):
    """Sentences: whether the list is complete, where the continuum starts, what was assumed."""
    words = [_completeness(args, levels)]
    words += [note[0].upper() + note[1:] + "." for note in levels.notes]
    if len(levels):
        both = "bracket and cross-check" if levels.budget.method is not None else "bracket"
        words.append(
            f"Energies are cut to the digits that {both} support; --json FILE has every digit."
        )
    profile = levels.profile
    if profile.mass_cells.shape[1] == 1 and (profile.mass_cells == 1).all():
        words.append(
            "The mass is 1 m_e everywhere, which is assumed where a table has no column m."
        )
    return words


def _completeness(args, levels):
    profile, count = levels.profile, len(levels)
    unit, edge = profile.units.energy, profile.open_edge
    walls = math.isinf(edge)
    continuum = f"the continuum starts at {edge:.10g} {unit}"
    if not levels.complete:
        return "The list is NOT complete: a bracket could not be closed in double precision."
    if args.window is not None:
        low, high = (repr(end).removesuffix(".0") for end in args.window)  # every digit
        found = _counted(count, "level")
        where = f"between {low} and {high} {unit}"
        also = "." if walls else f"; {continuum}."
        return f"The list is complete: {found} {where}{also}"
    if walls:
        return (
            "Between two walls levels go on for ever; "
            f"listed are the lowest {count}, none missed. --count N asks for N."
        )
    if count == 0:
        return (
            f"No level is bound: none lies below the continuum, which starts at {edge:.10g} {unit}."
        )
    if args.count is not None:
        return (
            f"Listed are the lowest {count}, none missed; there may be more. {_capital(continuum)}."
        )
    return f"The list is complete: {_counted(count, 'bound level')}; {continuum}."


def _counted(count, noun):
    return f"{count or 'no'} {noun}{'' if count == 1 else 's'}"


def _capital(text):
    return text[0].upper() + text[1:]


def _say(*lines, aside=False, end="\n"):
    """Print to stdout, or aside to stderr, spelling out what the encoding there does not have."""
    stream = sys.stderr if aside else sys.stdout
    if stream is None:  # closed before we came
        if aside:
            return
        raise InputError(f"standard output is closed\n  {_ELSEWHERE}")
    encoding = getattr(stream, "encoding", None) or "utf-8"
    text = "\n".join(lines) + end
    try:
        stream.write(text.encode(encoding, "backslashreplace").decode(encoding))
        stream.flush()
    except OSError as fault:
        if aside:  # there is nowhere left to say so, but the exit status
            _abandon(stream)
        elif isinstance(fault, BrokenPipeError):
            raise
        else:
            _abandon(stream)
            raise InputError(
                f"standard output cannot be written: {fault.strerror}\n  {_ELSEWHERE}"
            ) from None


def _complain(message, status):
    _say(f"eigen1d: {message}", aside=True)
    return status


def _abandon(stream):
    """Let go of a stream that takes no more, lest Python complain at exit of what it holds."""
    try:
        os.dup2(os.open(os.devnull, os.O_WRONLY), stream.fileno())
    except (OSError, ValueError):
        pass  # no file of ours
