"""How much a formula may ask for before it is refused.

Every bound is checked before the step it bounds is evaluated, so that no text
can make the reader build a huge number or a deep tree.  The values let a
practitioner's expanded potential through (20,000 characters, 100 levels of
brackets, constants such as 1e-40 or 1e400) and were set against a list of
hostile inputs kept with the tests (``tests/unit/hostile.json``).
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Limits:
    """The bounds of the reader; lengths in characters, sizes in bits.

    Attributes:
        length: characters of one formula.
        brackets: levels of open brackets.
        calls: functions nested in each other, V(x) and sqrt included.
        signs: signs or powers waiting for their operand in a row.
        name_length: characters of one name.
        names: names of one problem, all kinds together.
        literal_digits: digits of one number as written.
        literal_exponent: size of the decimal exponent of one number as written.
        number_bits: numerator or denominator of any folded constant.
        power_bits: what powers may contribute to a folded constant.
        small_exponent: integer powers up to this one count as products of literals.
        exponent: size of a numeric exponent, and of nested ones multiplied.
        exponent_denominator: denominator of a rational exponent.
        tower: nested exponents that hold a variable.
        bars: nested functions that are still simplified.
        exponential: size of the constant argument of an exponential.
        argument_bits: size of the constant argument of any other function.
    """

    length: int = 50_000
    brackets: int = 120
    calls: int = 8
    signs: int = 32
    name_length: int = 40
    names: int = 300
    literal_digits: int = 1_000
    literal_exponent: int = 1_000
    number_bits: int = 8_192
    power_bits: int = 512
    small_exponent: int = 8
    exponent: int = 10_000
    exponent_denominator: int = 1_000_000
    tower: int = 3
    bars: int = 4
    exponential: int = 1_000_000
    argument_bits: int = 64


LIMITS = Limits()
