"""Pictures: every level is there, readable, and the file is what its suffix says."""

import re
import subprocess
import sys
import warnings
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from eigen1d import InputError, Profile, Units, read_profile, solve
from eigen1d.draw import draw, positions, save

POTENTIALS = Path(__file__).parent.parent / "potentials"


@pytest.fixture(scope="module")
def levels():
    """Three levels of a 10 nm well, table from 0 to 20 nm."""
    return solve(Profile.from_rows([0, 5, 5, 15, 15, 20], [0.3, 0.3, 0, 0, 0.3, 0.3], mass=0.067))


def shipped(name):
    return solve(read_profile(POTENTIALS / name))


def curves(figure):
    """x and y of the wave functions in a picture, by level."""
    lines = {line.get_gid(): line.get_data() for line in figure.axes[0].lines}
    return {int(gid[4:]): data for gid, data in lines.items() if gid and gid.startswith("psi_")}


def labels(figure):
    return [text for text in figure.axes[0].texts if text.get_gid() == "label"]


@pytest.mark.parametrize("density", [False, True])
def test_each_level_has_its_wave_function_at_its_energy(levels, density):
    """Node counts are read off the picture: as many zeros of psi as the level's number."""
    found = curves(draw(levels, density=density))
    assert list(found) == [0, 1, 2]
    for n, (_, y) in found.items():
        lobe = y - levels.energy[n]
        if density:
            assert (lobe >= 0).all()
            highest = (lobe[1:-1] > lobe[:-2]) & (lobe[1:-1] >= lobe[2:])
            assert highest.sum() == n + 1
        else:
            assert (np.diff(np.sign(lobe[lobe != 0])) != 0).sum() == n
            assert lobe[:10].mean() > 0  # the leftmost lobe is positive


def test_waves_of_neighbours_do_not_collide(levels):
    """Curves that cross leave open which level they belong to."""
    for density in (False, True):
        found = curves(draw(levels, density=density))
        for n in (0, 1):
            assert found[n][1].max() < found[n + 1][1].min() + 1e-12


def test_jumps_are_vertical_lines_at_the_right_place(levels):
    """V from 0.3 to 0 at x = 5 and back at 15; a slanted line would be another potential."""
    (line,) = (line for line in draw(levels).axes[0].lines if line.get_gid() == "potential")
    x, V = line.get_data()
    for place in (5.0, 15.0):
        assert set(V[x == place]) == {0.0, 0.3}
    assert set(np.round(V, 12)) == {0.0, 0.3}


def test_tails_are_visible_beyond_open_edges(levels):
    """The part under the barrier is what tunnels; a picture cut at the table hides it."""
    x = curves(draw(levels))[2][0]
    assert x[0] < 0 and x[-1] > 20
    view = positions(levels)
    assert view.size == 2001 and view[0] == x[0] and view[-1] == x[-1]
    assert view[0] >= -0.35 * 20  # capped: a hardly bound level would fill the picture with tail


def test_nothing_is_drawn_beyond_a_wall():
    """psi is zero there, and V has no value."""
    profile = Profile.from_layers([4.0, 6.0], [0.0, 0.1], left="wall")
    found = solve(profile)
    assert positions(found)[0] == 0.0 and positions(found)[-1] > 10.0
    figure = draw(found)
    assert 0.0 <= min(x[0] for x, _ in curves(figure).values()) < 0.05
    assert figure.axes[0].get_xlim()[0] < 0.0  # room for the hatched wall


def test_axes_have_units_and_the_continuum_is_named(levels):
    """A picture without units decides nothing."""
    axes = draw(levels).axes[0]
    assert (axes.get_xlabel(), axes.get_ylabel()) == ("x [nm]", "energy [eV]")
    assert "continuum" in [text.get_text() for text in axes.texts]
    low, high = axes.get_ylim()
    assert low < 0.0 and high > 0.3


def test_miniband_gets_one_label():
    """Twenty labels on one spot are a black bar."""
    texts = [text.get_text() for text in labels(draw(shipped("stack_20.csv")))]
    assert texts[0] == "n = 0 to 19"


@pytest.mark.parametrize(
    "name", ["stack_20.csv", "hydrogen_molecule.csv", "triangular_channel.csv", "coupled_pair.csv"]
)
def test_labels_do_not_overlap_and_name_every_level(name):
    """Measured on the rendered text, not on the rule that placed it."""
    found = shipped(name)
    figure = draw(found)
    figure.canvas.draw()
    boxes = [text.get_window_extent() for text in labels(figure)]
    assert not any(a.overlaps(b) for i, a in enumerate(boxes) for b in boxes[:i])
    named = []
    for text in labels(figure):
        n = [int(number) for number in re.findall(r"\d+", text.get_text())]
        named += range(n[0], n[-1] + 1)
    assert named == list(found.n)
    right = figure.bbox.width
    assert all(box.x1 <= right for box in boxes)


def test_tall_walls_do_not_flatten_the_levels():
    """The inner wall of a molecule is ten times as high as its levels; the picture is not."""
    figure = draw(shipped("hydrogen_molecule.csv"))
    low, high = figure.axes[0].get_ylim()
    assert high < 50_000 and low < 0


def test_profile_without_levels_is_drawn():
    """The picture shows why nothing is bound."""
    figure = draw(shipped("bare_barrier.csv"))
    texts = [text.get_text() for text in figure.axes[0].texts]
    assert "no bound level" in texts and not any("each level" in text for text in texts)
    assert curves(figure) == {}
    low, high = figure.axes[0].get_ylim()
    assert low < 0.0 and high > 0.3


def rendered(figure):
    figure.canvas.draw()
    return figure.axes[0]


def caption(figure):
    (text,) = (t for t in figure.axes[0].texts if "scaled to fit" in t.get_text())
    return text


@pytest.mark.parametrize("scale", [1e-9, 1e6])
def test_power_of_ten_of_the_axis_is_not_covered(scale):
    """In metres the numbers mean nothing without their 1e-8."""
    x = np.array([0, 5, 5, 15, 15, 20]) * scale
    mass = 0.067 * (1e-9 / scale) ** 2
    profile = Profile.from_rows(x, [0.3, 0.3, 0, 0, 0.3, 0.3], mass=mass, units=Units("m", "eV"))
    figure = draw(solve(profile))
    axes = rendered(figure)
    power = axes.xaxis.get_offset_text()
    assert power.get_text()
    assert not caption(figure).get_window_extent().overlaps(power.get_window_extent())
    for other in (axes.xaxis.label, *axes.get_xticklabels()):
        assert not caption(figure).get_window_extent().overlaps(other.get_window_extent())


def test_energies_far_from_zero_are_whole_numbers_on_the_axis():
    """-0.65 beside a small -1.234e5 in the corner is read as -0.65."""
    V = np.array([0.3, 0.3, 0, 0, 0.3, 0.3]) - 123456.7
    axes = rendered(draw(solve(Profile.from_rows([0, 5, 5, 15, 15, 20], V, mass=0.067))))
    assert axes.yaxis.get_offset_text().get_text() == ""
    assert any("123456" in label.get_text() for label in axes.get_yticklabels())


@pytest.mark.parametrize("density", [False, True])
@pytest.mark.parametrize("edge", ["open", "wall"])
def test_waves_stay_within_the_picture(edge, density):
    """Low levels of a tall well, or the only level between walls, next to the picture's rim."""
    profile = Profile.from_rows(
        [0, 5, 5, 15, 15, 20], [1e3, 1e3, 0, 0, 1e3, 1e3], mass=0.067, left=edge, right=edge
    )
    box = Profile.from_layers([10.0], [0.0], mass=0.067, left="wall", right="wall")
    for found in (solve(profile, count=3), solve(box, count=1), solve(box, count=4)):
        figure = draw(found, density=density)
        low, high = figure.axes[0].get_ylim()
        for _, y in curves(figure).values():
            assert low < y.min() and y.max() < high


@pytest.mark.parametrize("suffix", ["png", "pdf", "svg"])
def test_title_in_a_script_that_the_font_lacks(levels, suffix, tmp_path):
    """Warnings of a library on the screen are read as a fault; SVG keeps the title whole."""
    title = "\N{CJK UNIFIED IDEOGRAPH-4E95}\N{CJK UNIFIED IDEOGRAPH-6238}"
    path = tmp_path / f"well.{suffix}"
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        save(draw(replace(levels, profile=replace(levels.profile, title=title))), path)
    assert suffix != "svg" or title in path.read_text(encoding="utf-8")


def test_title_is_taken_literally(levels, tmp_path):
    """A title comes from a file; a dollar sign in it is no formula."""
    odd = replace(levels, profile=replace(levels.profile, title="cost $5_0$ {x} " + 30 * "long "))
    figure = draw(odd)
    save(figure, tmp_path / "odd.svg")
    assert "$5_0$" in (tmp_path / "odd.svg").read_text()


@pytest.mark.parametrize("suffix", ["png", "pdf", "svg"])
def test_same_levels_give_the_same_bytes(levels, suffix, tmp_path):
    """Pictures lie in version control; a date in them would change every one each time."""
    for name in ("one", "two"):
        save(draw(levels), tmp_path / f"{name}.{suffix}")
    one, two = ((tmp_path / f"{name}.{suffix}").read_bytes() for name in ("one", "two"))
    assert one == two and len(one) > 5000


def test_png_is_a_picture_of_some_size(levels, tmp_path):
    """What is written can be read back, and is not blank."""
    from matplotlib.image import imread

    save(draw(levels), tmp_path / "well.png")
    pixels = imread(tmp_path / "well.png")
    assert pixels.shape == (840, 1200, 4)
    assert np.unique(pixels.reshape(-1, 4), axis=0).shape[0] > 50


def test_save_refuses_inputs_and_other_formats(levels, tmp_path):
    """The table that a picture was made from must survive it."""
    figure = draw(levels)
    table = tmp_path / "table.png"
    table.write_text("x [nm], V [eV]\n")
    with pytest.raises(InputError, match="would overwrite the input"):
        save(figure, table, inputs=[table])
    with pytest.raises(InputError, match=r"End the name in .png, .pdf or .svg"):
        save(figure, tmp_path / "well.jpeg")
    assert [path.name for path in tmp_path.iterdir()] == ["table.png"]
    assert table.read_text() == "x [nm], V [eV]\n"


def test_drawing_leaves_no_global_state():
    """pyplot keeps every figure alive; in a service that draws thousands that is a leak."""
    code = (
        "import sys\nfrom eigen1d import Profile, solve\nfrom eigen1d.draw import draw\n"
        "draw(solve(Profile.from_layers([5.0], [0.0], left='wall', right='wall'), count=1))\n"
        "assert 'matplotlib.pyplot' not in sys.modules"
    )
    subprocess.run([sys.executable, "-c", code], check=True)
