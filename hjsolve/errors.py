"""Exceptions: for bad input and for faults of this program, nothing else.

An expected failure (not separable, no closed form) is a value, not an exception.

    HJSolveError
    ├── InputError          the request can be read but not meant; points at the place
    ├── OutOfTime           a stage used up the time it was given
    └── Fault               a check was refuted: this program is wrong, nothing is shipped
"""

from __future__ import annotations


class HJSolveError(Exception):
    """Base of every exception raised on purpose."""


class InputError(HJSolveError):
    """Bad input.

    Attributes:
        detail: one sentence: what came, what was expected, what to do.
        pointer: RFC 6901 pointer to the field, such as ``/hamiltonian``.
        position: 0-based character offset into the text of that field, or None.
        expected: what would have been accepted there, or None.
        code: the kind of refusal, a short kebab-case word such as ``unknown-name``.
    """

    def __init__(
        self,
        detail: str,
        *,
        pointer: str = "",
        position: int | None = None,
        expected: str | None = None,
        code: str = "invalid",
    ) -> None:
        super().__init__(detail)
        self.detail = detail
        self.pointer = pointer
        self.position = position
        self.expected = expected
        self.code = code


class OutOfTime(HJSolveError):
    """A stage ran longer than its budget."""


class Fault(HJSolveError):
    """A certificate refuted a result of this program's own making."""
