"""Tree -> SymPy expression, in one walk without recursion, bounded at every step.

``0**0`` is 1, as in the polynomials where it comes from.  What SymPy's own
automatic evaluation makes infinite, undefined or imaginary is refused at its
place in the text.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping
from dataclasses import replace

from flint import arb
from sympy import Abs, Add, Expr, Function, Integer, Mul, Pow, S, gamma, pi, sign

from hjsolve.errors import InputError
from hjsolve.reading import bounds
from hjsolve.reading.bounds import Value
from hjsolve.reading.functions import ANSWER_ONLY, FUNCTIONS
from hjsolve.reading.grammar import Node
from hjsolve.reading.limits import LIMITS
from hjsolve.reading.numbers import decimal

_EXPONENTIAL = frozenset({"exp", "sinh", "cosh"})
_SETTLING = 4
"""Rounds after which an expression counts as settled; two were seen to do."""

_ENDLESS = (S.ComplexInfinity, S.NaN, S.Infinity, S.NegativeInfinity)


class Builder:
    """Builds the expression of one formula from its tree."""

    def __init__(self, names: Mapping[str, Expr], functions: Collection[str], pointer: str) -> None:
        self.names = names
        self.functions = functions
        self.pointer = pointer
        self.arity: dict[str, int] = {}

    def build(self, root: Node) -> Value:
        """Walk the tree bottom up."""
        pending: list[tuple[Node, bool]] = [(root, False)]
        done: list[Value] = []
        while pending:
            node, ready = pending.pop()
            if not ready and node.children:
                pending.append((node, True))
                pending.extend((child, False) for child in reversed(node.children))
                continue
            count = len(node.children)
            children = done[len(done) - count :]
            del done[len(done) - count :]
            value = self._value(node, children)
            if not value.constant and value.expression.is_Rational:
                # The variables have cancelled: 9*x/x is the constant 9.
                value = replace(value, ball=bounds.rational_ball(value.expression))
            if value.constant or any(
                part.func is value.expression.func for part in value.expression.args
            ):
                value = replace(value, expression=_settled(value.expression))
            done.append(self._checked(value, node))
        return done.pop()

    def refuse(
        self, detail: str, position: int | None, code: str, expected: str | None = None
    ) -> InputError:
        """An error that points into this formula."""
        return InputError(
            detail, pointer=self.pointer, position=position, expected=expected, code=code
        )

    def _value(self, node: Node, children: list[Value]) -> Value:
        match node.kind:
            case "number":
                number = decimal(node.text, pointer=self.pointer, position=node.position)
                return Value(number, bounds.rational_ball(number))
            case "name":
                return self._name(node)
            case "call":
                return self._call(node, children)
            case "sum":
                return self._sum(node, children)
            case "product":
                return self._product(node, children)
            case "negative":
                (inner,) = children
                ball = None if inner.ball is None else -inner.ball
                expression = Mul(S.NegativeOne, inner.expression)
                return Value(expression, ball, *_largest(children))
            case "power":
                return self._power(node, *children)

    def _checked(self, value: Value, node: Node) -> Value:
        """Refuse what SymPy's evaluation of this step has shown to be no real number."""
        expression = value.expression
        if expression in _ENDLESS:
            raise self.refuse(
                "this has no finite value", node.position, "undefined", "a finite expression"
            )
        if node.kind in ("power", "call", "product") and bounds.imaginary(expression):
            raise self.refuse("this is not real for the signs declared", node.position, "not-real")
        if bounds.folded_bits(expression) > LIMITS.number_bits or value.grown > LIMITS.power_bits:
            raise self.refuse(
                "the constants here fold into a number too long to work with",
                node.position,
                "number-too-large",
                f"numbers of at most {LIMITS.power_bits} bits from powers",
            )
        return value

    def _name(self, node: Node) -> Value:
        name = node.text
        if name in self.names:
            expression = self.names[name]
            if expression.is_Rational:
                return Value(expression, bounds.rational_ball(expression))
            return Value(expression, None)
        if name == "pi":
            return Value(pi, arb.pi())
        if name in FUNCTIONS or name in self.functions:
            raise self.refuse(
                f"{name} is a function and needs its arguments in brackets",
                node.position,
                "function-without-arguments",
                f"{name}(…)",
            )
        declared = ", ".join(sorted(self.names)) or "none"
        raise self.refuse(
            f"the name {name!r} is not declared; declared are: {declared}. Add it to "
            "coordinates, momenta or parameters, or correct it",
            node.position,
            "unknown-name",
            "a declared name",
        )

    def _call(self, node: Node, children: list[Value]) -> Value:
        name, count = node.text, len(children)
        known = FUNCTIONS.get(name)
        if known is None and name not in self.functions:
            raise self._no_function(node)
        wanted = known.arity if known else (self.arity.setdefault(name, count),)
        if count not in wanted:
            raise self.refuse(
                f"{name} takes {' or '.join(map(str, wanted))} argument(s), here it has {count}",
                node.position,
                "wrong-arity",
                f"{' or '.join(map(str, wanted))} argument(s)",
            )
        balls = [child.ball for child in children if child.ball is not None]
        constant = len(balls) == count
        if constant and known:
            self._bound_arguments(node, balls)
        degree, tower, grown, bars = _largest(children)
        if name in _EXPONENTIAL and not constant:
            tower = self._taller(tower, node)
        arguments = [child.expression for child in children]
        if known is None:
            expression = Function(name)(*arguments)
        elif known.make in (Abs, sign):
            bars += 1
            expression = _folded(known.make, arguments[0], bars)
        elif bars >= LIMITS.bars and not constant:
            # Asking for signs through nested hyperbolic functions is exponential in SymPy.
            bars += 1
            expression = known.make(*arguments, evaluate=False)
        else:
            bars += 1
            expression = known.make(*arguments)
            if constant and expression.has(gamma):
                # elliptic_k(1/2) becomes Γ(-1/4), which the grammar does not have.
                expression = known.make(*arguments, evaluate=False)
        ball = bounds.call_ball(name, balls) if constant and known else None
        return Value(expression, ball, degree, tower, grown, bars)

    def _no_function(self, node: Node) -> InputError:
        name = node.text
        if name in self.names or name == "pi":
            detail = f"{name} is not a function; write {name}*(…) for a product"
        elif name in ANSWER_ONLY:
            detail = f"{name}(…) occurs in answers alone"
        else:
            detail = (
                f"{name} is no function of the grammar; declare it under functions "
                "if it is an arbitrary function"
            )
        return self.refuse(detail, node.position, "unknown-function", "a function of the grammar")

    def _bound_arguments(self, node: Node, balls: list[arb]) -> None:
        if node.text in _EXPONENTIAL:
            fits = bool(bounds.size(balls[0]) <= LIMITS.exponential)
        elif node.text in ("sqrt", "abs", "sign", "atan"):
            fits = True  # an argument of any size, or of one nobody knows, does no harm
        else:
            fits = all(bool(bounds.size(b) < arb(2) ** LIMITS.argument_bits) for b in balls)
        if not fits:
            raise self.refuse(
                f"the constant argument of {node.text} is too large to work with",
                node.position,
                "number-too-large",
            )

    def _taller(self, tower: int, node: Node) -> int:
        if tower >= LIMITS.tower:
            raise self.refuse(
                f"more than {LIMITS.tower} exponents with variables stand on each other",
                node.operator or node.position,
                "tower",
            )
        return tower + 1

    def _sum(self, node: Node, children: list[Value]) -> Value:
        terms = [
            Mul(S.NegativeOne, child.expression) if turned else child.expression
            for child, turned in zip(children, node.turned, strict=True)
        ]
        return Value(Add(*terms), _total(children, node.turned), *_largest(children))

    def _product(self, node: Node, children: list[Value]) -> Value:
        factors: list[Expr] = []
        radicals = 0
        for child, turned, place in zip(children, node.turned, node.children, strict=True):
            if turned and child.expression.is_zero:
                raise self._zero_divisor(place.position)
            factor = Pow(child.expression, S.NegativeOne) if turned else child.expression
            radicals += child.constant and not factor.is_Rational
            factors.append(factor)
        if radicals > LIMITS.signs:
            # Mul gathers numeric radicals pair by pair.
            raise self.refuse(
                f"more than {LIMITS.signs} irrational constants in one product",
                node.position,
                "too-long",
            )
        degree, tower, _, bars = _largest(children)
        grown = sum(child.grown for child in children)
        ball = _product_ball(children, node.turned)
        return Value(Mul(*factors), ball, degree, tower, grown, bars)

    def _zero_divisor(self, position: int) -> InputError:
        return self.refuse(
            "this divisor is zero", position, "division-by-zero", "a divisor that is not zero"
        )

    def _power(self, node: Node, base: Value, exponent: Value) -> Value:
        power = exponent.expression
        if base.expression.is_zero and not power.is_nonnegative:
            if power.is_Rational:
                raise self._zero_divisor(node.position)
            raise self.refuse("zero to a power that may be negative", node.position, "undefined")
        if not exponent.constant:
            tower = max(base.tower, self._taller(exponent.tower, node))
            degree, _, _, bars = _largest([base, exponent])
            # Powers of one base are gathered: 9**(x + 10**50)*9**-x would be evaluated.
            times = bounds.largest_number(power)
            if times > LIMITS.exponent:
                raise self._exponent(node, "a number in this exponent is too large")
            content = bounds.content_bits(base.expression)
            grown = max(content, base.grown) * max(times, 1.0) + exponent.grown
            return Value(Pow(base.expression, power), None, degree, tower, grown, bars)
        bound = bounds.size(exponent.ball) if exponent.ball is not None else arb("inf")
        if not bool(bound <= LIMITS.exponent):
            raise self._exponent(node, "this exponent is too large")
        if power.is_Rational and int(power.q) > LIMITS.exponent_denominator:
            raise self._exponent(node, "the denominator of this exponent is too large")
        times = float(bound)
        degree = base.degree * max(times, 1.0)
        if not base.constant and degree > LIMITS.exponent:
            raise self._exponent(node, "the exponents nested here are too large together")
        grown = self._growth(base, power, times)
        if grown > LIMITS.power_bits:
            raise self.refuse(
                "this power of a constant is too long a number",
                node.operator,
                "number-too-large",
                f"at most {LIMITS.power_bits} bits",
            )
        ball = self._power_ball(node, base, exponent)
        return Value(Pow(base.expression, power), ball, degree, base.tower, grown, base.bars)

    def _exponent(self, node: Node, detail: str) -> InputError:
        return self.refuse(
            detail,
            node.operator,
            "exponent-too-large",
            f"exponents up to {LIMITS.exponent}, nested ones multiplied",
        )

    def _growth(self, base: Value, power: Expr, times: float) -> float:
        content = bounds.content_bits(base.expression)
        if isinstance(power, Integer) and times <= LIMITS.small_exponent:
            # Counts as a product of literals: hbar**4 with hbar = 1.05e-34 is real work.
            return max(1.0, times) * base.grown
        return max(content, base.grown) * max(times, 1.0)

    def _power_ball(self, node: Node, base: Value, exponent: Value) -> arb | None:
        if base.ball is None or exponent.ball is None:
            return None
        if isinstance(exponent.expression, Integer):
            ball = base.ball ** int(exponent.expression)
        elif base.ball > 0:
            ball = base.ball**exponent.ball
        else:
            return bounds.unknown()
        limit = (arb(LIMITS.exponential) * 4).exp()
        if ball.is_finite() and not bool(bounds.size(ball) <= limit):
            raise self.refuse(
                "this constant is too large to work with", node.operator, "number-too-large"
            )
        return ball if ball.is_finite() else bounds.unknown()


def _settled(expression: Expr) -> Expr:
    """A sum or product made again from its parts, until that changes nothing.

    SymPy's powers of numeric radicals are not settled at once: sqrt(2*sqrt(21/5))
    comes with 5*sqrt(2) as one factor, sqrt(sqrt(8/5)) with 5**(1/4)*sqrt(5)
    apart, so that their text would not read back to the same expression.
    """
    for _ in range(_SETTLING):
        if not (expression.is_Add or expression.is_Mul):
            break
        again = expression.func(*expression.args)
        if again == expression:
            break
        expression = again
    return expression


def _largest(children: list[Value]) -> tuple[float, int, float, int]:
    return (
        max(child.degree for child in children),
        max(child.tower for child in children),
        max(child.grown for child in children),
        max(child.bars for child in children),
    )


def _total(children: list[Value], turned: list[bool]) -> arb | None:
    total = arb(0)
    for child, minus in zip(children, turned, strict=True):
        if child.ball is None:
            return None
        total = total - child.ball if minus else total + child.ball
    return total


def _product_ball(children: list[Value], turned: list[bool]) -> arb | None:
    total = arb(1)
    for child, below in zip(children, turned, strict=True):
        if child.ball is None:
            return None
        total = total / child.ball if below else total * child.ball
    return total if total.is_finite() else bounds.unknown()


def _folded(make: Callable[..., Expr], argument: Expr, bars: int) -> Expr:
    """|x| or the sign of x, without evaluations that take minutes.

    ``Abs`` expands the product of its argument with its conjugate when it does
    not know it to be real, and both ask for the signs inside nested ones again
    at each level: 40 levels took 0.35 s, 100 took 32 s.
    """
    if argument.is_Symbol or argument.is_Number:
        return make(argument)
    if bars <= LIMITS.bars and argument.is_extended_real:
        return make(argument)
    return make(argument, evaluate=False)
