"""What can go wrong, by kind: a file, a value, a solution. A missing file is a ``FileNotFoundError``."""

from __future__ import annotations

from typing import Any

__all__ = ["HushrailError", "RangeError", "ReadError", "SolveError"]


class HushrailError(Exception):
    """Any error of hushrail but a missing file."""


class ReadError(HushrailError, ValueError):
    """A file says something that cannot be understood or used.

    Parameters
    ----------
    text : str
        The whole message: where, what was found, what would be right.
    path : str
        File as the user named it; empty when no file is concerned.
    line, column : int
        Place in the file, from one; zero when the file as a whole is concerned.

    Examples
    --------
    >>> error = ReadError("a.lib:3:7: `+` opens the file; want a statement", "a.lib", 3, 7)
    >>> print(error)
    a.lib:3:7: `+` opens the file; want a statement
    >>> error.path, error.line, error.column
    ('a.lib', 3, 7)
    """

    def __init__(self, text: str, path: str = "", line: int = 0, column: int = 0) -> None:
        super().__init__(text)
        self.path = path
        self.line = line
        self.column = column

    def __reduce__(self) -> tuple[Any, ...]:
        """Keep the place when the error goes to another process."""
        return type(self), (str(self), self.path, self.line, self.column)


class RangeError(HushrailError, ValueError):
    """An argument that cannot be used; the message says what was found and what would be right."""


class SolveError(HushrailError, RuntimeError):
    """A solution does not exist or was not found within the limits."""
