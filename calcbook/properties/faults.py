"""The fault of this room: a fluid or a property that cannot be given as asked."""

from __future__ import annotations

from collections.abc import Sequence


class PropertyFault(Exception):
    """A fluid name, a state or a property that cannot be given.

    ``code`` is a stable word, ``message`` holds the numbers, ``expected`` says what would do and
    ``nearest`` lists the names that were probably meant.
    """

    def __init__(self, code: str, message: str, expected: str = "", nearest: Sequence[str] = ()):
        super().__init__(message)
        self.code = code
        self.message = message
        self.expected = expected
        self.nearest = tuple(nearest)

    def __reduce__(self) -> tuple[type[PropertyFault], tuple[str, str, str, tuple[str, ...]]]:
        return (PropertyFault, (self.code, self.message, self.expected, self.nearest))
