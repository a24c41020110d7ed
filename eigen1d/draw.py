"""One picture: V(x), each level at its energy, its wave function on it, the continuum shaded.

matplotlib is imported when a picture is drawn: `positions` serves tables of wave functions too.
"""

import io
import os
import textwrap
import warnings

import numpy as np

from ._files import write_whole
from .errors import InputError

FORMATS = ("png", "pdf", "svg")
# Neighbouring levels alternate between a blue and an orange that differ in lightness too: they stay
# apart in every kind of colour blindness and in grey print.
COLOURS = ("#1d5c96", "#dd7324")
INK, CONTINUUM, WALL = "#22262b", "#e9ebee", "#b9bec5"
GREY = "#5b626b"
_FAINT = 0.01  # a tail is shown until psi has fallen to this part of its largest value,
_TAIL_SHARE = (0.05, 0.35)  # over at least and at most this part of the profile's span
_LABEL_HEIGHT = 0.032  # of the axes: what a line of text needs
_TALLEST, _LEAST = 0.13, 0.012  # height of a wave function, as a part of the axes


def draw(levels, *, density=False):
    """Draw V(x) with its levels and their wave functions.

    Parameters
    ----------
    levels : Levels
    density : bool, optional
        Draw psi^2 rather than psi.

    Returns
    -------
    matplotlib.figure.Figure
        Each wave function stands on its level, scaled to the room that its neighbours leave.

    Examples
    --------
    >>> from eigen1d import Profile, solve
    >>> box = Profile.from_layers([10.0], [0.0], left="wall", right="wall")
    >>> figure = draw(solve(box, count=3))
    >>> figure.axes[0].get_xlabel()
    'x [nm]'
    """
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(8.0, 5.6), dpi=150, layout="constrained")
    FigureCanvasAgg(figure)
    axes = figure.add_subplot()
    profile = levels.profile
    left, right = _span(levels)
    bottom, top = _heights(levels)
    axes.set_xlim(left, right)
    axes.set_ylim(bottom, top)
    _draw_surroundings(axes, profile, (left, right), (bottom, top))
    _draw_waves(axes, levels, density, top - bottom)
    _draw_potential(axes, profile, left, right)
    _draw_labels(axes, levels, top - bottom)
    axes.set_xlabel(f"x [{profile.units.length}]")
    axes.set_ylabel(f"energy [{profile.units.energy.replace('^-1', '$^{-1}$')}]")
    name = profile.title or os.path.basename(profile.source) or "potential"
    name = name.encode("utf-8", "replace").decode()  # a file's name may hold bytes of no text
    axes.set_title(textwrap.fill(name, 84), loc="left", fontsize=11, parse_math=False)
    if len(levels):
        what = "\N{GREEK SMALL LETTER PSI}" + "\N{SUPERSCRIPT TWO}" * density
        axes.text(  # on the left: on the right stands the power of ten of x, if there is one
            0.0, -0.075, f"{what} on each level, scaled to fit", transform=axes.transAxes,
            ha="left", va="top", fontsize=8, color=GREY,
        )  # fmt: skip
    axes.ticklabel_format(axis="y", useOffset=False)  # an energy is read off, not added up
    axes.spines[["top", "right"]].set_visible(False)
    return figure


def check_suffix(path):
    """Return the format that the suffix of `path` asks for, or raise `InputError`."""
    suffix = os.path.splitext(os.fspath(path))[1].lower().removeprefix(".")
    if suffix not in FORMATS:
        fault = f"pictures are not written as .{suffix}" if suffix else "a picture needs a suffix"
        raise InputError(f"{path}: {fault}\n  End the name in .png, .pdf or .svg.")
    return suffix


def save(figure, path, inputs=()):
    """Write a figure as PNG, PDF or SVG, by its suffix; whole or not at all.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
    path : str or PathLike
    inputs : sequence of str or PathLike, optional
        Files that were read and must not be overwritten.

    Raises
    ------
    InputError
        Another suffix, or a path that cannot be written.
    """
    from matplotlib import rc_context

    form = check_suffix(path)
    content = io.BytesIO()
    # No date and no random names: the same levels give the same bytes.
    undated = {"png": {}, "pdf": {"CreationDate": None}, "svg": {"Date": None}}[form]
    fixed = rc_context({"svg.hashsalt": "eigen1d", "svg.fonttype": "none"})
    with fixed, warnings.catch_warnings():
        # A title in a script that the font lacks: SVG keeps it, elsewhere boxes show what happened.
        warnings.filterwarnings("ignore", "Glyph .* missing from", UserWarning)
        figure.savefig(content, format=form, metadata=undated)
    write_whole(path, content.getvalue(), inputs)


def positions(levels, points=2001):
    """Equally spaced positions that show every wave function with its tails.

    Parameters
    ----------
    levels : Levels
    points : int, optional

    Returns
    -------
    ndarray, shape (points,)
        From the first to the last cell and, beyond open edges, some decay lengths of the highest
        level, in `units.length`.
    """
    return np.linspace(*_span(levels), points, endpoint=True)


# What is in view ---------------------------------------------------------------------------------


def _span(levels):
    """The first and the last position in view."""
    profile = levels.profile
    x = np.linspace(profile.x[0], profile.x[-1], 1001)
    psi = np.abs(levels.psi(x)) if len(levels) else np.empty((0, x.size))
    out = []
    for edge, at, side in ((profile.left, 0, -1), (profile.right, -1, 1)):
        beyond = 0.0
        if edge.kind == "open":
            mass = edge.mass * profile.units.electron_mass
            kappa = np.sqrt(2.0 * mass * np.maximum(edge.V - levels.energy, 0.0))
            with np.errstate(divide="ignore"):  # a level at the edge itself has an endless tail
                reach = np.log(np.maximum(psi[:, at] / (_FAINT * psi.max(axis=1)), 1.0)) / kappa
            least, most = (share * (x[-1] - x[0]) for share in _TAIL_SHARE)
            beyond = min(max(reach.max(initial=0.0), least), most)
        out.append(x[at] + side * beyond)
    return out


def _heights(levels):
    """The lowest and the highest energy in view.

    The barriers are shown whole unless they dwarf the levels: a diatomic curve's inner wall would
    leave nothing of the rest.
    """
    profile = levels.profile
    low = min(profile.V_min, profile.open_edge)
    reach = [e for e in (*levels.energy[-1:], profile.open_edge) if np.isfinite(e)]
    peak = max(_corners(profile))
    high = max(reach, default=peak)
    if not high > low:  # nothing bound: V itself is the picture
        high = peak if peak > low else low + 1.0
    high = peak if high < peak < 2.0 * high - low else high
    # The lowest psi goes below its level by 0.5 _TALLEST of the axes, the highest psi^2 above its
    # own by 0.85 of that: 0.079 and 0.135 of what is between the margins.
    return low - 0.08 * (high - low), high + 0.14 * (high - low)


def _corners(profile):
    """V at both ends of each cell."""
    return np.concatenate([profile.V_cells[:, 0], profile.V_cells.sum(axis=1)])


# The parts of the picture ------------------------------------------------------------------------


def _draw_surroundings(axes, profile, across, heights):
    """The continuum, and what lies behind walls."""
    if np.isfinite(profile.open_edge):
        axes.axhspan(profile.open_edge, heights[1], color=CONTINUUM, zorder=0, linewidth=0)
        axes.text(
            0.995, 0.985, "continuum", transform=axes.transAxes, ha="right", va="top", fontsize=8,
            color=GREY,
        )  # fmt: skip
    depth = 0.03 * (across[1] - across[0])
    for edge, end, side in ((profile.left, across[0], -1), (profile.right, across[1], 1)):
        if edge.kind == "wall":
            outer = end + side * depth
            axes.axvspan(
                min(end, outer), max(end, outer), facecolor="white", edgecolor=WALL, hatch="////",
                linewidth=0, zorder=4,
            )  # fmt: skip
            axes.axvline(end, color=INK, linewidth=2.0, zorder=5)
            low, high = axes.get_xlim()
            axes.set_xlim(min(low, outer), max(high, outer))


def _draw_potential(axes, profile, left, right):
    """V(x), a jump as a vertical line: each cell is drawn from its own end to its own end."""
    inner = np.linspace(0.0, 1.0, 2 if profile.V_cells.shape[1] <= 2 else 33)
    if profile.cells * inner.size > 200_000:  # finer than any picture
        inner = inner[[0, -1]]
    start, width = profile.x[:-1, None], np.diff(profile.x)[:, None]
    x = (start + width * inner).ravel()
    V = np.zeros((profile.cells, inner.size))
    for k in reversed(range(profile.V_cells.shape[1])):
        V = V * inner + profile.V_cells[:, k : k + 1]
    x = np.concatenate([[left], x, [right]])
    V = np.concatenate([[V[0, 0]], V.ravel(), [V[-1, -1]]])
    axes.plot(x, V, color=INK, linewidth=1.4, zorder=3, solid_joinstyle="miter", gid="potential")


def _draw_waves(axes, levels, density, height):
    if not len(levels):
        axes.text(0.01, 0.97, "no bound level", transform=axes.transAxes, va="top", color=GREY)
        return
    left, right = _span(levels)
    x = np.linspace(left, right, 1500 + 12 * int(levels.n[-1]))
    psi = levels.psi(x)
    if density:
        psi = psi**2
    room, sharing = _rooms(levels.energy, height)
    crowd = np.clip(len(levels) / 12, 1.0, 3.0)  # many levels: thinner lines
    for i, energy in enumerate(levels.energy):
        colour = COLOURS[int(levels.n[i]) % 2]
        size = np.abs(psi[i])
        # psi has lobes on both sides of its level, psi^2 only above it.
        curve = energy + room[i] * (0.85 if density else 0.5) * psi[i] / size.max()
        seen = size > (0.1 if density else 1.0) * _FAINT * size.max()
        seen = slice(np.argmax(seen), seen.size - np.argmax(seen[::-1]))
        axes.axhline(energy, color=colour, linewidth=0.6, alpha=0.7, zorder=1)
        axes.fill_between(
            x[seen], energy, curve[seen], color=colour, alpha=0.22 / sharing[i], linewidth=0,
            zorder=2,
        )  # fmt: skip
        axes.plot(
            x[seen], curve[seen], color=colour, linewidth=1.3 / crowd, alpha=sharing[i] ** -0.25,
            zorder=2, gid=f"psi_{levels.n[i]}",
        )  # fmt: skip


def _rooms(energy, height):
    """(height that each wave function may take, how many levels share that room).

    The room is the distance to the nearest neighbour. Levels closer than a hair in the picture, as
    those of a stack are, no scale can keep apart: they share the room of their group.
    """
    hair = _LEAST * height
    cuts = np.flatnonzero(np.diff(energy) >= hair) + 1
    room, sharing = np.empty(energy.size), np.empty(energy.size)
    for group in np.split(np.arange(energy.size), cuts):
        first, last = group[0], group[-1]
        below = energy[first] - energy[first - 1] if first > 0 else np.inf
        above = energy[last + 1] - energy[last] if last + 1 < energy.size else np.inf
        room[group] = np.clip(min(below, above), hair, _TALLEST * height)
        sharing[group] = group.size
    return room, sharing


def _draw_labels(axes, levels, height):
    for first, last, place in _merged_labels(levels.energy, _LABEL_HEIGHT * height):
        joint = {0: "", 1: f", {levels.n[last]}"}.get(last - first, f" to {levels.n[last]}")
        axes.text(
            1.008, place, f"n = {levels.n[first]}{joint}",
            transform=axes.get_yaxis_transform(), ha="left",
            va="center", fontsize=8, color=INK, gid="label",
        )  # fmt: skip


def _merged_labels(energy, height):
    """Groups of levels (first, last, place of the label), no two places closer than `height`.

    A level joins the group below it if the labels of the two would overlap; the label moves to the
    middle of what it names, and may then meet the next group below.
    """
    groups = []
    for i, e in enumerate(energy):
        groups.append((i, i, e))
        while len(groups) > 1 and groups[-1][2] - groups[-2][2] < height:
            (first, _, _), (_, last, _) = groups[-2:]
            groups[-2:] = [(first, last, energy[first : last + 1].mean())]
    return groups
