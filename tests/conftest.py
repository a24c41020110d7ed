"""Fixtures of the tests of the command line."""

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
