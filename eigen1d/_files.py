"""Writing a file whole or not at all."""

import errno
import os
import secrets
import stat

from .errors import InputError


def write_whole(path, content, inputs=()):
    """Write a file so that it is complete or as it was before.

    The content goes to a new file in the same folder, which then takes the place of the old one in
    one step. A symbolic link is followed and stays a link. A file that exists keeps its
    permissions. What is no regular file, such as /dev/null, is written to directly.

    Parameters
    ----------
    path : str or PathLike
    content : str or bytes
        Text is encoded as UTF-8, line ends as they are.
    inputs : sequence of str or PathLike, optional
        Files that were read and must not be overwritten.

    Raises
    ------
    InputError
        The path is a directory or an input, its folder does not exist, or it cannot be written.

    Examples
    --------
    >>> import pathlib, tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_whole(f"{folder}/levels.csv", "n,energy\\n")
    ...     print(pathlib.Path(folder, "levels.csv").read_text(), end="")
    n,energy
    """
    path = os.fspath(path)
    data = content.encode() if isinstance(content, str) else content
    try:
        target = os.path.realpath(path)
        _check(path, target, inputs)
        if os.path.exists(path) and not os.path.isfile(path):
            with open(path, "wb") as stream:
                stream.write(data)
        else:
            _replace(target, data)
    except (OSError, ValueError) as fault:
        if isinstance(fault, InputError):
            raise
        reason = getattr(fault, "strerror", None) or fault
        raise InputError(
            f"{path}: cannot be written: {reason}\n"
            "  Name a file in a folder that can be written to and has room."
        ) from None


def _check(path, target, inputs):
    if os.path.isdir(target) or path.endswith(os.sep):
        raise InputError(
            f"{path}: is a folder, a file was expected\n"
            f"  Add a file name, such as {os.path.join(path, 'levels.json')}."
        )
    if os.path.islink(target):  # a circle: os.replace would put a file in its place
        raise OSError(errno.ELOOP, os.strerror(errno.ELOOP))
    for other in inputs:
        if _same(path, target, other):
            raise InputError(
                f"{path}: would overwrite the input {os.fspath(other)}\n"
                "  Name another file for the output."
            )
    folder = os.path.dirname(target)
    if not os.path.isdir(folder):
        raise InputError(
            f"{path}: there is no folder {os.path.dirname(path) or folder}\n"
            "  Make the folder first, or name one that exists."
        )


def _same(path, target, other):
    if os.path.exists(path) and os.path.exists(other):
        return os.path.samefile(path, other)
    return target == os.path.realpath(other)


def _replace(target, data):
    mode = None
    if os.path.exists(target):
        mode = stat.S_IMODE(os.stat(target).st_mode)
        if not os.access(target, os.W_OK):  # replacing it would work, yet it says hands off
            raise PermissionError(None, "the file is write-protected")
    # tempfile makes files that only their owner can read; a plain open() obeys the umask.
    part = os.path.join(os.path.dirname(target), f".{secrets.token_hex(8)}.part")
    try:
        with open(part, "xb") as stream:
            stream.write(data)
            stream.flush()
            os.fsync(stream.fileno())  # a full disk may speak up only now
        if mode is not None:
            os.chmod(part, mode)
        os.replace(part, target)
    except BaseException:  # an interrupt too must leave nothing behind
        if os.path.exists(part):
            os.unlink(part)
        raise
