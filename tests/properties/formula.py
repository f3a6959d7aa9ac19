"""A small reader of request formulas for the tests, independent of the solver's.

``parse`` gives a tree of tuples; ``evaluate`` walks it over exact rationals, complex balls or
univariate power series in balls, so that one text serves points and Taylor expansions alike.
"""

from __future__ import annotations

import re
from typing import Any

import flint
import mpmath

Node = tuple[Any, ...]
TOKEN = re.compile(
    r"\s*(?:(?P<number>(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)"
    r"|(?P<name>[^\W\d]\w*)|(?P<sign>\*\*|[-+*/^(),]))"
)
BINDING = {"+": (10, 11), "-": (10, 11), "*": (20, 21), "/": (20, 21), "**": (40, 39)}


def parse(text: str, functions: list[str]) -> Node:
    """The tree of a formula: ("num", q), ("name", s), ("call", s, args), (op, left, right)."""
    tokens: list[tuple[str, str]] = []
    place = 0
    while place < len(text.rstrip()):
        match = TOKEN.match(text, place)
        if match is None:
            raise ValueError(f"{text!r} at {place}")
        kind = match.lastgroup or ""
        tokens.append((kind, "**" if match[kind] == "^" else match[kind]))
        place = match.end()
    tokens.append(("end", ""))
    node, rest = _climb(tokens, 0, 0)
    if tokens[rest][0] != "end":
        raise ValueError(f"unexpected {tokens[rest][1]!r} in {text!r}")
    return node


def _climb(tokens: list[tuple[str, str]], at: int, floor: int) -> tuple[Node, int]:
    kind, word = tokens[at]
    at += 1
    if word in "+-" and kind == "sign":
        inner, at = _climb(tokens, at, 30)
        left: Node = inner if word == "+" else ("neg", inner)
    elif word == "(":
        left, at = _climb(tokens, at, 0)
        at += 1
    elif kind == "number":
        left = ("num", _exact(word))
    elif kind == "name" and tokens[at][1] == "(":
        arguments, at = [], at + 1
        while tokens[at][1] != ")":
            argument, at = _climb(tokens, at, 0)
            arguments.append(argument)
            at += tokens[at][1] == ","
        left, at = ("call", word, tuple(arguments)), at + 1
    elif kind == "name":
        left = ("name", word)
    else:
        raise ValueError(f"unexpected {word!r}")
    while tokens[at][1] in BINDING and BINDING[tokens[at][1]][0] >= floor:
        operator = tokens[at][1]
        right, at = _climb(tokens, at + 1, BINDING[operator][1])
        left = (operator, left, right)
    return left, at


def _exact(word: str) -> flint.fmpq:
    mantissa, _, exponent = word.lower().partition("e")
    whole, _, part = mantissa.partition(".")
    value = flint.fmpq(int((whole + part) or "0"), 10 ** len(part))
    return value * flint.fmpq(10) ** int(exponent or 0)


def names_in(node: Node) -> set[str]:
    """Every plain name of a tree."""
    if node[0] == "name":
        return {node[1]}
    parts = node[2] if node[0] == "call" else node[1:]
    return set().union(*(names_in(x) for x in parts if isinstance(x, tuple))) if parts else set()


def evaluate(node: Node, values: dict[str, Any], functions: dict[str, list[flint.fmpq]]) -> Any:
    """The value of a tree; ``functions`` are coefficients of the arbitrary functions."""
    kind = node[0]
    if kind == "num":
        return node[1]
    if kind == "name":
        return flint.acb.pi() if node[1] == "pi" and "pi" not in values else values[node[1]]
    if kind == "neg":
        return -evaluate(node[1], values, functions)
    if kind == "call":
        arguments = [evaluate(x, values, functions) for x in node[2]]
        if node[1] in functions:
            return _stand_in(functions[node[1]], arguments)
        return _call(node[1], arguments)
    left, right = (evaluate(x, values, functions) for x in node[1:])
    if kind == "**":
        return _power(left, right)
    return _arithmetic(kind, left, right)


def _series(x: Any) -> flint.acb_series:
    return x if isinstance(x, flint.acb_series) else flint.acb_series([x, 0, 0])


def _arithmetic(kind: str, left: Any, right: Any) -> Any:
    if not isinstance(left, flint.fmpq) or not isinstance(right, flint.fmpq):
        series = isinstance(left, flint.acb_series) or isinstance(right, flint.acb_series)
        left, right = (_series(x) if series else flint.acb(x) for x in (left, right))
    if kind == "+":
        return left + right
    if kind == "-":
        return left - right
    return left * right if kind == "*" else left / right


def _power(base: Any, exponent: Any) -> Any:
    if isinstance(exponent, flint.fmpq) and exponent.q == 1:
        power, result = abs(int(exponent.p)), flint.fmpq(1)
        while power:
            if power & 1:
                result = _arithmetic("*", result, base)
            power >>= 1
            if power:
                base = _arithmetic("*", base, base)
        return _arithmetic("/", flint.fmpq(1), result) if exponent < 0 else result
    if exponent == flint.fmpq(1, 2):
        return _call("sqrt", [base])
    return _call("exp", [_arithmetic("*", exponent, _call("log", [base]))])


def _stand_in(coefficients: list[flint.fmpq], arguments: list[Any]) -> Any:
    """A generic polynomial Σ c_k s_k^k with all of its numbers from the coefficients.

    s_k = Σ a_ki x_i are different combinations of the arguments, so that no mixed
    derivative vanishes by accident.
    """
    total: Any = coefficients[0]
    place = 1
    for degree in (1, 2, 3, 4, 5):
        mixture: Any = flint.fmpq(0)
        for argument in arguments:
            term = _arithmetic("*", coefficients[place] + 2, argument)
            mixture = _arithmetic("+", mixture, term)
            place += 1
        scaled = _arithmetic("*", coefficients[place] / 10, _power(mixture, flint.fmpq(degree)))
        total = _arithmetic("+", total, scaled)
        place += 1
    return total


def _call(name: str, arguments: list[Any]) -> Any:
    x = arguments[0]
    series = isinstance(x, flint.acb_series)
    x = x if series else flint.acb(x)
    if name in ("sqrt", "exp", "log", "sin", "cos", "tan", "atan"):
        return getattr(x, name)()
    if name in ("sinh", "cosh", "tanh"):
        up, down = x.exp(), (-x).exp()
        if name == "tanh":
            return (up - down) / (up + down)
        return (up + down) / 2 if name == "cosh" else (up - down) / 2
    if name in ("cot", "sec", "csc"):
        upper = x.cos() if name == "cot" else flint.acb(1)
        return upper / (x.cos() if name == "sec" else x.sin())
    if name in ("asin", "acos"):
        turned = -flint.acb(0, 1) * (flint.acb(0, 1) * x + (1 - x * x).sqrt()).log()
        return turned if name == "asin" else flint.acb.pi() / 2 - turned
    if name == "asinh":
        return (x + (x * x + 1).sqrt()).log()
    if name == "acosh":
        return (x + (x * x - 1).sqrt()).log()
    if name in ("abs", "Abs"):
        return x if float(_series(x)[0].real.mid()) > 0 else -x
    return _special(name, x, arguments[1:], series)


def _special(name: str, x: Any, rest: list[Any], series: bool) -> Any:
    """f(a + δ) = f(a) + f′(a) δ + ½ f″(a) δ² from closed derivatives."""
    centre = flint.acb(x[0]) if series else x
    if name == "lambert_w":
        w = centre.lambertw()
        first = w / (centre * (1 + w))
        second = -(w * w) * (w + 2) / (centre * centre * (1 + w) ** 3)
        value = w
    elif name in ("jacobi_sn", "jacobi_cn", "jacobi_dn"):
        value, first, second = _jacobi(name, centre, rest[0])
    else:
        raise NotImplementedError(f"no evaluation of {name}")
    if not series:
        return value
    step = x - flint.acb_series([centre, 0, 0])
    return (
        flint.acb_series([value, 0, 0])
        + flint.acb_series([first, 0, 0]) * step
        + flint.acb_series([second / 2, 0, 0]) * step * step
    )


def _jacobi(name: str, u: flint.acb, m: Any) -> tuple[flint.acb, flint.acb, flint.acb]:
    with mpmath.workprec(flint.ctx.prec + 40):
        modulus = mpmath.mpf(int(m.p)) / int(m.q)
        place = mpmath.mpf(u.real.mid().str(300, radius=False))
        sn, cn, dn = (
            flint.acb(mpmath.nstr(mpmath.ellipfun(kind, place, m=modulus), 290))
            for kind in ("sn", "cn", "dn")
        )
    if name == "jacobi_sn":
        return sn, cn * dn, -(1 + m) * sn + 2 * m * sn**3
    if name == "jacobi_cn":
        return cn, -sn * dn, (2 * m - 1) * cn - 2 * m * cn**3
    return dn, -m * sn * cn, (2 - m) * dn - 2 * dn**3
