"""Exact numbers from text, bounded before they are built."""

from __future__ import annotations

import re

from sympy import Rational

from hjsolve.errors import InputError
from hjsolve.reading.limits import LIMITS

_DECIMAL = re.compile(r"([0-9]*)(?:\.([0-9]*))?(?:[eE]([+-]?[0-9]+))?")
_SIGNED = re.compile(
    r"\s*([+-]?)((?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)"
    r"(?:\s*/\s*([0-9]+(?:\.[0-9]*)?(?:[eE][+-]?[0-9]+)?))?\s*"
)


def decimal(text: str, *, pointer: str, position: int | None) -> Rational:
    """The exact rational that an unsigned decimal stands for (0.1 is 1/10).

    Raises:
        InputError: more digits or a larger exponent than ``LIMITS`` allows.
    """
    match = _DECIMAL.fullmatch(text)
    if match is None:
        raise ValueError(f"{text!r} is no decimal number")
    whole, part, power = match.group(1), match.group(2) or "", match.group(3) or "0"
    if len(whole) + len(part) > LIMITS.literal_digits:
        raise InputError(
            f"a number of {len(whole) + len(part)} digits; "
            f"at most {LIMITS.literal_digits} are read",
            pointer=pointer,
            position=position,
            code="number-too-long",
        )
    # The length is tested first: int() of a long exponent would itself be work.
    if len(power) > 8 or abs(int(power)) > LIMITS.literal_exponent:
        raise InputError(
            f"the exponent of this number is beyond {LIMITS.literal_exponent}",
            pointer=pointer,
            position=position,
            code="number-too-large",
        )
    exponent = int(power) - len(part)
    digits = int(whole + part or "0")
    if exponent >= 0:
        return Rational(digits * 10**exponent)
    return Rational(digits, 10**-exponent)


def signed(text: str, *, pointer: str) -> Rational | None:
    """The exact value of ``"0.1"``, ``"-2e-3"`` or ``"3/7"``; None if the text is no number.

    Raises:
        InputError: division by zero, or a number beyond ``LIMITS``.
    """
    # Longer than any number within the limits: not even matched.
    match = _SIGNED.fullmatch(text) if len(text) <= 4 * LIMITS.literal_digits else None
    if match is None:
        return None
    value = decimal(match.group(2), pointer=pointer, position=match.start(2))
    if match.group(3) is not None:
        divisor = decimal(match.group(3), pointer=pointer, position=match.start(3))
        if divisor == 0:
            raise InputError(
                "this number divides by zero",
                pointer=pointer,
                position=match.start(3),
                code="division-by-zero",
            )
        value = value / divisor
    return -value if match.group(1) == "-" else value
