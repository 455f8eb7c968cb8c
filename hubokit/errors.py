"""The errors that hubokit raises on purpose, each one line that says what was given, where, and what would do."""

from __future__ import annotations

from typing import Self


class HubokitError(Exception):
    """Base of every error that hubokit raises on purpose.

    Parameters
    ----------
    message : str
        What was given and what would do, without a final full stop.
    place : str, optional
        The place inside the file or argument: a JSON pointer, ``line 12``, an argument name.
    file : str, optional
        The file as the user named it.

    Examples
    --------
    >>> print(InputError("weight is not a whole number: 1.5", place="/terms/0/weights/3", file="m.json"))
    m.json: /terms/0/weights/3: weight is not a whole number: 1.5
    """

    def __init__(self, message: str, place: str | None = None, file: str | None = None) -> None:
        super().__init__(message, place, file)
        self.message = message
        self.place = place
        self.file = file

    def __str__(self) -> str:
        line = ": ".join(part for part in (self.file, self.place, self.message) if part)
        return " ".join(line.split())

    def located(self, *, file: str | None = None, place: str | None = None) -> Self:
        """The same error with the file and place filled in where they were missing."""
        return type(self)(self.message, self.place or place, self.file or file)


class InputError(HubokitError, ValueError):
    """Bad input or bad usage: nothing was done."""


class LimitError(HubokitError):
    """Work refused before its start: the message says the size, the cost and what else would do."""
