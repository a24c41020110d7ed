"""Outputs are whole or not there, and never on top of an input."""

import errno
import os
import stat

import pytest

from eigen1d import _files
from eigen1d._files import write_whole
from eigen1d.errors import InputError


@pytest.fixture(autouse=True)
def folder(tmp_path, monkeypatch):
    """An empty working folder, so that messages hold no path."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


def mode(path):
    return stat.S_IMODE(os.stat(path).st_mode)


@pytest.mark.parametrize(
    ("content", "data"),
    [("E = 1 \N{GREEK SMALL LETTER MU}eV\n", b"E = 1 \xce\xbceV\n"), (b"\x00\r\n", b"\x00\r\n")],
)
def test_content_is_written_as_it_is(content, data, folder):
    """The same file on every system: UTF-8, line ends untouched."""
    write_whole("out.txt", content)
    assert (folder / "out.txt").read_bytes() == data
    write_whole(folder / "out.txt", content)
    assert os.listdir() == ["out.txt"]


def test_new_file_obeys_the_umask(folder):
    """Colleagues must be able to read what a plain open() would let them read."""
    before = os.umask(0o027)
    try:
        write_whole("out.txt", "new")
    finally:
        os.umask(before)
    assert mode("out.txt") == 0o640


def test_old_file_keeps_its_permissions(folder):
    """Writing a private file again must not publish it."""
    (folder / "out.txt").write_text("old")
    os.chmod("out.txt", 0o600)
    write_whole("out.txt", "new")
    assert mode("out.txt") == 0o600
    assert (folder / "out.txt").read_text() == "new"


def test_symbolic_link_stays_a_link(folder):
    """The link is someone's arrangement; only what it points to is written."""
    (folder / "real").mkdir()
    (folder / "real" / "out.txt").write_text("old")
    os.symlink("real/out.txt", "link.txt")
    os.symlink("real/later.txt", "dangling.txt")
    for link in ("link.txt", "dangling.txt"):
        write_whole(link, "new")
        assert os.path.islink(link)
    assert sorted(os.listdir("real")) == ["later.txt", "out.txt"]
    assert (folder / "real" / "out.txt").read_text() == "new"
    assert (folder / "real" / "later.txt").read_text() == "new"


def test_device_is_written_to_not_replaced(folder):
    """Replacing /dev/null by a file would break the machine; a pipe stands in for it here."""
    os.mkfifo("pipe")
    reader = os.open("pipe", os.O_RDONLY | os.O_NONBLOCK)
    try:
        write_whole("pipe", "new")
        assert os.read(reader, 10) == b"new"
    finally:
        os.close(reader)
    assert stat.S_ISFIFO(os.stat("pipe").st_mode)
    assert os.listdir() == ["pipe"]


@pytest.mark.parametrize("step", ["write", "replace", "interrupt"])
def test_disk_error_leaves_the_old_file_and_nothing_else(step, folder, monkeypatch):
    """A half-written result looks like a whole one to the next program."""
    (folder / "out.txt").write_text("old")
    full = KeyboardInterrupt() if step == "interrupt" else OSError(errno.ENOSPC, "No space left")

    def fail(*_):
        raise full

    monkeypatch.setattr(_files.os, "replace" if step == "replace" else "fsync", fail)
    with pytest.raises(KeyboardInterrupt if step == "interrupt" else InputError) as caught:
        write_whole("out.txt", "new")
    if step != "interrupt":
        assert str(caught.value) == (
            "out.txt: cannot be written: No space left\n"
            "  Name a file in a folder that can be written to and has room."
        )
    assert os.listdir() == ["out.txt"]
    assert (folder / "out.txt").read_text() == "old"


@pytest.mark.parametrize(
    ("path", "text"),
    [
        (
            "sub",
            "sub: is a folder, a file was expected\n  Add a file name, such as sub/levels.json.",
        ),
        (
            "sub/",
            "sub/: is a folder, a file was expected\n  Add a file name, such as sub/levels.json.",
        ),
        (
            "no/out.txt",
            "no/out.txt: there is no folder no\n  Make the folder first, or name one that exists.",
        ),
        (
            "well.csv/out.txt",
            "well.csv/out.txt: there is no folder well.csv\n"
            "  Make the folder first, or name one that exists.",
        ),
        (
            "circle",
            "circle: cannot be written: Too many levels of symbolic links\n"
            "  Name a file in a folder that can be written to and has room.",
        ),
        (
            "x" * 300,
            "x" * 300 + ": cannot be written: File name too long\n"
            "  Name a file in a folder that can be written to and has room.",
        ),
        (
            "a\0b",
            "a\0b: cannot be written: embedded null byte\n"
            "  Name a file in a folder that can be written to and has room.",
        ),
    ],
)
def test_path_that_cannot_be_written_is_explained(path, text, folder):
    """Nothing is left behind, and the message says what to name instead."""
    (folder / "well.csv").write_text("table")
    (folder / "sub").mkdir()
    os.symlink("circle", "circle")
    with pytest.raises(InputError) as caught:
        write_whole(path, "new")
    assert str(caught.value) == text
    assert sorted(os.listdir()) == ["circle", "sub", "well.csv"]
    assert os.listdir("sub") == []


@pytest.mark.skipif(not os.path.isdir("/proc/self"), reason="needs a folder that root cannot write")
def test_folder_that_cannot_be_written_is_explained():
    """Root may write nearly everywhere, but not into the list of processes."""
    with pytest.raises(InputError, match="^/proc/out.txt: cannot be written: "):
        write_whole("/proc/out.txt", "new")


def test_write_protected_file_is_left_alone(folder, monkeypatch):
    """A folder that can be written to would let the file be replaced in spite of its protection."""
    (folder / "out.txt").write_text("old")
    monkeypatch.setattr(_files.os, "access", lambda path, how: how != os.W_OK)  # root may always
    with pytest.raises(InputError, match="out.txt: cannot be written: the file is write-protected"):
        write_whole("out.txt", "new")
    assert (folder / "out.txt").read_text() == "old"
    assert os.listdir() == ["out.txt"]


@pytest.mark.parametrize("output", ["well.csv", "./well.csv", "sub/../well.csv", "soft", "hard"])
@pytest.mark.parametrize("given", ["well.csv", "soft"])
def test_input_is_never_overwritten(output, given, folder):
    """However the file is spelt, a measured table cannot be had again."""
    (folder / "well.csv").write_text("table")
    (folder / "sub").mkdir()
    os.symlink("well.csv", "soft")
    os.link("well.csv", "hard")
    with pytest.raises(InputError) as caught:
        write_whole(output, "new", inputs=["other.csv", given])
    assert str(caught.value) == (
        f"{output}: would overwrite the input {given}\n  Name another file for the output."
    )
    assert (folder / "well.csv").read_text() == "table"


def test_other_files_beside_an_input_are_written(folder):
    """The guard must not refuse what is safe."""
    (folder / "well.csv").write_text("table")
    write_whole("levels.csv", "new", inputs=["well.csv", "-"])
    assert (folder / "levels.csv").read_text() == "new"
