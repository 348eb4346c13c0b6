"""What clockfall raises. Every error carries its data as attributes, so that no caller parses text."""

from __future__ import annotations


class ClockfallError(Exception):
    """Root of all errors that clockfall raises on purpose; its text is fit to be shown to a user."""


class BadInput(ClockfallError, ValueError):
    """Something the user gave cannot be used. The command line ends with exit code 2."""


class OutOfRange(BadInput):
    """A number lies outside the range in which it has a meaning.

    Attributes
    ----------
    what, expected, found, cure : str
        The name of the number, the range with its unit, the offending value (and where), and what to do about it.
    """

    def __init__(self, what: str, expected: str, found: str, cure: str = "") -> None:
        self.what = what
        self.expected = expected
        self.found = found
        self.cure = cure
        super().__init__(what, expected, found, cure)

    def __str__(self) -> str:
        text = f"{self.what}: expected {self.expected}, found {self.found}"
        return f"{text}; {self.cure}" if self.cure else text


class UnknownField(ClockfallError, AttributeError):
    """A state field is needed that this binary does not know, or that does not exist.

    Attributes
    ----------
    name : str
        The field asked for.
    """

    def __init__(self, name: str, message: str) -> None:
        super().__init__(message)
        self.name = name
