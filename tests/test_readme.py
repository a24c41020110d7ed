"""What README says is what happens."""

import math
import pathlib
import re
import shlex

import numpy as np

from eigen1d import Profile, cli, solve

ROOT = pathlib.Path(__file__).resolve().parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")


def blocks(language):
    """Fenced blocks of README in one language."""
    return re.findall(rf"^```{language}\n(.*?)^```$", README, re.M | re.S)


def test_there_are_exactly_two_commands_for_a_fresh_machine():
    """A newcomer has nothing but python3: one line shows the tool at work, one tests it."""
    fresh = [block for block in blocks("sh") if "python3 -m venv" in block]
    assert len(fresh) == 2
    for command in fresh:
        assert command.count("\n") == 1
    assert "eigen1d levels potentials/" in fresh[0] and "pytest" in fresh[1]


def test_the_output_shown_is_the_output(capsys, monkeypatch):
    """Words and columns are compared exactly, energies to a digit that no machine changes."""
    monkeypatch.chdir(ROOT)
    assert cli.main(["levels", "potentials/graded_well.csv"]) == 0
    printed, shown = capsys.readouterr().out.splitlines(), blocks("text")[0].splitlines()
    assert len(printed) == len(shown)
    for ours, theirs in zip(printed, shown, strict=True):
        ours, theirs = ours.split(), theirs.split()
        if ours and ours[0].isdigit() and len(ours) == 6:
            assert abs(float(ours[1]) - float(theirs[1])) < 2e-12
            assert ours[4:] == theirs[4:]
        else:
            assert ours == theirs


def test_the_examples_in_python_run(capsys, monkeypatch):
    """An example that fails is the worst first impression."""
    monkeypatch.chdir(ROOT)
    for code, lines in zip(blocks("python"), (2, 1), strict=True):
        exec(code, {})
        assert len(capsys.readouterr().out.splitlines()) == lines


def test_noise_that_is_drawn_is_the_noise_of_the_budget():
    """The example of many profiles scatters as sigma_V says: two ways to one number.

    The standard deviation of a thousand draws is itself known to 1 / sqrt(2000), and left room for
    three times that (common practice, no source).
    """
    names = {}
    exec(blocks("python")[1], names)
    well = Profile.from_rows(names["x"], names["V"], names["mass"], sigma_V=0.0025)
    (noise,) = solve(well, count=1).budget.noise
    assert abs(names["many"].energy.std() / noise - 1) < 3 / math.sqrt(2000)


def test_words_that_are_explained_are_words_that_are_printed(capsys, tmp_path):
    """A note that README explains under other words than the screen's is explained to nobody.

    A wall and a well of depth V and width a bind one more level each time sqrt(2 m V) a passes
    pi/2 (common practice, no source); here a = m = 1.
    """
    (note,) = re.findall(r'says\s+that "(.*?)"', README, re.S)
    table = tmp_path / "threshold.csv"
    table.write_text(f"thickness [bohr], V [hartree]\n1, 0\n1, {math.pi**2 / 8!r}\n")
    assert cli.main(["levels", str(table), "--left", "wall"]) == 0
    assert note in capsys.readouterr().out.lower()


def test_every_command_shown_can_be_found():
    """`eigen1d` alone is not found after an installation in .venv, unless PATH says so."""
    first = README.index("\neigen1d ")
    assert 'PATH="$PWD/.venv/bin:$PATH"' in README[:first]


def test_ends_of_the_smooth_curve_are_as_explained():
    """Not-a-knot: the first two cells share one cubic, the last two too."""
    profile = Profile.from_rows([0, 1, 3, 4, 6, 7], [3, 0, 1, 5, 2, 2], interpolation="smooth")
    for x in ([0, 0.5, 1, 2, 3], [4, 5, 6, 6.5, 7]):
        V = profile.V(x)
        assert np.allclose(np.polyval(np.polyfit(x, V, 3), x), V, rtol=0, atol=1e-12)


def test_the_commands_shown_are_understood(tmp_path, monkeypatch):
    """Every other command line of README is run on the table that README shows."""
    monkeypatch.chdir(tmp_path)
    pathlib.Path("my.csv").write_text(blocks("text")[1])
    lines = [line for block in blocks("sh") for line in block.splitlines()]
    lines = [line for line in lines if line.startswith("eigen1d ")]
    assert len(lines) == 3
    for line in lines:
        assert cli.main(shlex.split(line, comments=True)[1:]) == 0, line
    assert {path.name for path in tmp_path.iterdir()} == {"my.csv", "levels.json", "my.pdf"}
