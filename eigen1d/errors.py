"""The exceptions that a user can meet; everything else is a fault of the program.

    InputError (ValueError)       the call or a value in it is wrong     exit status 2
        TableError                a fault in a file, with its place      exit status 2
    CheckError (RuntimeError)     two results that must agree do not     exit status 3

A message says what is wrong, where, what was found, and what to write instead. Its first line
suffices alone; the command line prints it as it stands.
"""


class InputError(ValueError):
    """An argument, or a combination of arguments, that cannot be used."""


class TableError(InputError):
    """A fault in a table file.

    Parameters
    ----------
    message : str
        The whole text that the user sees.
    path : str, optional
        The file as the user named it.
    line, column : int, optional
        Place of the fault, counted from 1 as an editor counts, comments and header included;
        `column` is the number of the table's column, not of the character.
    name : str, optional
        Header of that column, such as ``"V [eV]"``.
    found : str, optional
        What stands there, exactly.
    """

    def __init__(self, message, path=None, line=None, column=None, name=None, found=None):
        super().__init__(message)
        self.path = path
        self.line = line
        self.column = column
        self.name = name
        self.found = found


class CheckError(RuntimeError):
    """Two independent results that must agree do not; the message shows both."""
