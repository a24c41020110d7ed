"""What README says is what happens."""

import pathlib
import re
import shlex

from eigen1d import cli

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


def test_the_example_in_python_runs(capsys, monkeypatch):
    """An example that fails is the worst first impression."""
    monkeypatch.chdir(ROOT)
    (code,) = blocks("python")
    exec(code, {})
    assert len(capsys.readouterr().out.splitlines()) == 2


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
