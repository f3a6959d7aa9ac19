"""What is known of a value before it is combined with others.

SymPy folds constants as soon as an expression is made, so a bound has to be
checked first.  Every value read carries a ball for its size when it is a
constant, the largest exponent in it, the height of its tower of variable
exponents, and the bits that powers have put into its constants.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import inf, log2

from flint import arb, fmpq
from sympy import Expr, Rational
from sympy.core.numbers import ImaginaryUnit

_UNKNOWN = arb("0 +/- inf")


@dataclass(frozen=True, slots=True)
class Value:
    """A built expression with its bounds.

    Attributes:
        expression: the SymPy expression.
        ball: encloses the value of a constant (infinitely wide when unknown);
            None when a variable occurs.
        degree: bound on the products of nested numeric exponents.
        tower: levels of exponents that hold a variable.
        grown: bits that powers have put into folded constants.
        bars: levels of functions of the grammar.
    """

    expression: Expr
    ball: arb | None
    degree: float = 1.0
    tower: int = 0
    grown: float = 0.0
    bars: int = 0

    @property
    def constant(self) -> bool:
        """Whether no variable occurs."""
        return self.ball is not None


def rational_ball(value: Rational) -> arb:
    """The ball of a rational, at the working precision."""
    return arb(fmpq(int(value.p), int(value.q)))


def number_bits(value: Rational) -> int:
    """Bits of the longer of numerator and denominator."""
    return max(abs(int(value.p)).bit_length(), int(value.q).bit_length())


def _log2(value: Rational) -> float:
    return log2(max(abs(int(value.p)), int(value.q)))


def content_bits(expression: Expr) -> float:
    """Bits of the numbers that a numeric power of this expression would raise."""
    total = 0.0
    factors = expression.args if expression.is_Mul else (expression,)
    for factor in factors:
        if factor.is_Rational:
            total += _log2(factor)
        elif factor.is_Pow and factor.base.is_Rational and factor.exp.is_Rational:
            total += _log2(factor.base) * float(abs(factor.exp))
    return total


def largest_number(expression: Expr) -> float:
    """The largest absolute value of the rationals anywhere in an expression."""
    pending, largest = [expression], 0.0
    while pending:
        part = pending.pop()
        if part.is_Rational:
            # Compared in bits first: a float does not hold every integer.
            whole = abs(int(part.p)) // int(part.q)
            largest = max(largest, float(abs(part)) if whole.bit_length() < 64 else inf)
        pending.extend(part.args)
    return largest


def folded_bits(expression: Expr) -> int:
    """Bits of the longest number at the top of a sum or product, one level down."""
    terms = expression.args if expression.is_Add else (expression,)
    longest = 0
    for term in terms:
        factor = term.as_coeff_Mul()[0] if term.is_Mul else term
        if factor.is_Rational:
            longest = max(longest, number_bits(factor))
    return longest


def imaginary(expression: Expr) -> bool:
    """Whether the imaginary unit shows at the top of a value, two levels down.

    Enough at every step of a construction from real leaves: the unit can only
    enter at the step that is looked at.
    """
    terms = expression.args if expression.is_Add else (expression,)
    for term in terms:
        factors = term.args if term.is_Mul else (term,)
        if any(isinstance(factor, ImaginaryUnit) for factor in factors):
            return True
    return False


def size(ball: arb) -> arb:
    """An upper bound of the absolute value, infinite when nothing is known."""
    upper = ball.abs_upper() if ball.is_finite() else arb("inf")
    return upper


def call_ball(name: str, arguments: list[arb]) -> arb:
    """The ball of a function of constants; infinitely wide where no bound is at hand."""
    if len(arguments) == 1:
        argument = arguments[0]
        if name == "abs":
            return abs(argument)
        if name == "sign":
            return arb("0 +/- 1")
        method = {"sqrt", "exp", "log", "sin", "cos", "tan", "cot", "sec", "csc"} | {
            "asin", "acos", "atan", "sinh", "cosh", "tanh", "asinh", "acosh", "atanh"
        }  # fmt: skip
        if name in method:
            ball = getattr(argument, name)()
            return ball if ball.is_finite() else _UNKNOWN
    if name == "atan2":
        return arb("0 +/- 3.1416")
    if name in ("jacobi_sn", "jacobi_cn"):
        return arb("0 +/- 1")
    return _UNKNOWN


def unknown() -> arb:
    """The ball that says nothing."""
    return _UNKNOWN
