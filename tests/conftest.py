"""Fixtures of the tests of the command line and of tables."""

from pathlib import Path

import pytest
from command_line import WELL

from eigen1d import cli


@pytest.fixture
def folder(tmp_path, monkeypatch):
    """An empty working folder with one table, so that messages hold no path."""
    monkeypatch.chdir(tmp_path)
    Path("well.csv").write_text(WELL)
    return tmp_path


@pytest.fixture
def run(capsys):
    """Run the command line; return status, stdout and stderr."""

    def call(*argv):
        status = cli.main([str(word) for word in argv])
        return status, *capsys.readouterr()

    return call


@pytest.fixture
def write(tmp_path, monkeypatch):
    """Write well.csv in the working folder, so that messages hold no path."""
    monkeypatch.chdir(tmp_path)

    def write(content, name="well.csv"):
        data = content if isinstance(content, bytes) else content.encode()
        (tmp_path / name).write_bytes(data)
        return name

    return write
