"""The grammar of formulas: what it means, and where it points when it refuses."""

from __future__ import annotations

import time

import pytest
from sympy import (
    Abs,
    Expr,
    Function,
    LambertW,
    Pow,
    Rational,
    Symbol,
    atan2,
    cos,
    elliptic_e,
    elliptic_f,
    elliptic_pi,
    exp,
    log,
    pi,
    sin,
    sqrt,
)

from hjsolve.algebra.functions import carlson_rj, jacobi_sn, weierstrass_p
from hjsolve.errors import InputError
from hjsolve.reading import LIMITS, read_formula

NAMES = {
    n: Symbol(n, real=True)
    for n in [
        "a",
        "b",
        "c",
        "d",
        "f",
        "g",
        "h",
        "j",
        "m",
        "p",
        "u",
        "x",
        "y",
        "z",
        "E",
        "I",
        "S",
        "N",
        "Q",
        "O",
        "C",
        "beta",
        "pi_1",
        "θ",
    ]
}
a, b, c, m, p, u, x, y, z = (NAMES[n] for n in ["a", "b", "c", "m", "p", "u", "x", "y", "z"])
r = NAMES["r"] = Symbol("r", positive=True)


def read(text: str, functions: tuple[str, ...] = ()) -> Expr:
    return read_formula(text, NAMES, functions, pointer="/hamiltonian")


def refused(text: str, functions: tuple[str, ...] = ()) -> InputError:
    with pytest.raises(InputError) as refusal:
        read(text, functions)
    assert refusal.value.pointer == "/hamiltonian"
    return refusal.value


@pytest.mark.parametrize(
    ("text", "meaning"),
    [
        ("p^2/2 + x", p**2 / 2 + x),
        ("-x^2", -(x**2)),
        ("-x**2*y", -(x**2) * y),
        ("2^-1", Rational(1, 2)),
        ("2**-x**2", Pow(2, -(x**2))),
        ("x^2^3", x**8),
        ("(x^2)^3", x**6),
        ("x - y - z", x - y - z),
        ("x - (y - z)", x - y + z),
        ("x/y/z", x / y / z),
        ("x/y*z", x * z / y),
        ("x/(y*z)", x / (y * z)),
        ("x/(y/z)", x * z / y),
        ("2*-x", -2 * x),
        ("x - -y", x + y),
        ("+x", x),
        ("-x*y^2", -x * y**2),
        ("x/-y*z", -x * z / y),
        ("2^-x*y", y * 2**-x),
        ("x*-y^2*z", -x * y**2 * z),
        ("z - -x*y", z + x * y),
        ("-(x + 1)*(y + 1)", -((x + 1) * (y + 1))),
        ("--x^2", x**2),
        ("x^-y^2*z", z * x ** (-(y**2))),
        ("sqrt(sqrt(8/5))*x", Rational(8, 5) ** Rational(1, 4) * x),
        ("1/(2*(x + 1))", Rational(1, 2) / (x + 1)),
        ("x^(3/2)", x ** Rational(3, 2)),
        ("x^0.5", sqrt(x)),
        ("x^-0.5*y", y / sqrt(x)),
        ("0.1 + 0.2 - 0.3", Rational(0)),
        ("1e-40*x", x / 10**40),
        ("1e400*x", 10**400 * x),
        (".5*x + 1.*y", x / 2 + y),
        ("1.5E+2", Rational(150)),
        ("pi*x", pi * x),
        ("pi_1*x", NAMES["pi_1"] * x),
        ("E + I*p + S + N + Q + O + C", sum(NAMES[n] for n in "ESNQOC") + NAMES["I"] * p),
        ("θ^2", NAMES["θ"] ** 2),
        ("0^0*x + 0/x", x),
        ("abs(x) + abs(r)", Abs(x) + r),
        ("abs(-3*x)", 3 * Abs(x)),
        ("atan2(y, x)", atan2(y, x)),
        ("lambert_w(x)", LambertW(x)),
        ("elliptic_f(u, m)", elliptic_f(u, m)),
        ("elliptic_e(m) + elliptic_e(u, m)", elliptic_e(m) + elliptic_e(u, m)),
        ("elliptic_pi(a, m) + elliptic_pi(a, u, m)", elliptic_pi(a, m) + elliptic_pi(a, u, m)),
        ("jacobi_sn(u, m)", jacobi_sn(u, m)),
        ("carlson_rj(x, y, z, p)", carlson_rj(x, y, z, p)),
        ("weierstrass_p(u, a, b)", weierstrass_p(u, a, b)),
        ("exp(1000)*x - exp(999)*x", exp(1000) * x - exp(999) * x),
        ("(p+x+y+z)^64", (p + x + y + z) ** 64),
        ("sin(x)*cos(y)*log(r)", sin(x) * cos(y) * log(r)),
    ],
)
def test_meaning(text: str, meaning: Expr) -> None:
    assert read(text) == meaning


def test_declared_functions() -> None:
    assert read("V(x) + W(x, y)", ("V", "W")) == Function("V")(x) + Function("W")(x, y)


@pytest.mark.parametrize(
    ("text", "position", "code"),
    [
        ("", 0, "empty"),
        ("  ", 2, "empty"),
        ("p^2/2 +", 7, "ends-early"),
        ("p^2/(2*m", 4, "unbalanced"),
        ("x*(", 2, "unbalanced"),
        ("x + y)", 5, "unbalanced"),
        ("()", 1, "unexpected"),
        ("x*/y", 2, "unexpected"),
        ("sin()", 4, "unexpected"),
        ("2x", 1, "implicit-product"),
        ("p^2/2m", 5, "implicit-product"),
        ("x y", 2, "implicit-product"),
        ("(x)(y)", 3, "implicit-product"),
        ("2 (x)", 2, "implicit-product"),
        ("x, y", 1, "unexpected"),
        ("(x, y)", 2, "unexpected"),
        ("x + w", 4, "unknown-name"),
        ("x(3)", 0, "unknown-function"),
        ("gamma(3)", 0, "unknown-function"),
        ("integral(x, x, 0, 1)", 0, "unknown-function"),
        ("x*sin", 2, "function-without-arguments"),
        ("atan2(x)", 0, "wrong-arity"),
        ("1 + sin(x, y)", 4, "wrong-arity"),
        ("elliptic_e(x, y, z)", 0, "wrong-arity"),
        ("1/0", 2, "division-by-zero"),
        ("1/(x-x)", 3, "division-by-zero"),
        ("1/(1/0)", 5, "division-by-zero"),
        ("0^-1", 0, "division-by-zero"),
        ("0^x", 0, "undefined"),
        ("log(0)", 0, "undefined"),
        ("atan2(0, 0)", 0, "undefined"),
        ("sqrt(-2)", 0, "not-real"),
        ("x*log(-2)", 2, "not-real"),
        ("p + х", 4, "unexpected-character"),
        ("p = x", 2, "unexpected-character"),
        ("x." , 1, "unexpected-character"),
        ("Α", 0, "unexpected-character"),
        ("9**9**9", 1, "exponent-too-large"),
        ("x^10001", 1, "exponent-too-large"),
        ("((x^200 + 1)^100 + 1)", 12, "exponent-too-large"),
        ("((9^60)^60)^60", 7, "number-too-large"),
        ("(10^60*x)^60", 9, "number-too-large"),
        ("2^513*x", 1, "number-too-large"),
        ("exp(exp(exp(3)))", 0, "number-too-large"),
        ("9^(9^(9*x/x))", 1, "exponent-too-large"),
        ("9^(x+9^100)*9^-x", 1, "exponent-too-large"),
        ("9^(x*(y+9^100))", 1, "exponent-too-large"),
        ("(9^(200*x))^(1/x)", 1, "number-too-large"),
        ("exp(jacobi_dn(pi, x - x))", 0, "number-too-large"),
        ("x^x^x^x^x", 1, "tower"),
        ("exp(exp(exp(exp(x))))", 0, "tower"),
        ("1e1001", 0, "number-too-large"),
        ("x" * 41, 0, "name-too-long"),
    ],
)  # fmt: skip
def test_refusal_points_at_the_place(text: str, position: int, code: str) -> None:
    error = refused(text)
    assert (error.position, error.code) == (position, code)


def test_messages_say_what_to_do() -> None:
    assert "*" in refused("2x").detail
    assert "declared are: " in refused("omega*x").detail
    assert "brackets" in refused("x*sin").detail
    assert "declare it under functions" in refused("V(x)").detail


def test_one_arity_for_a_function() -> None:
    assert refused("V(x) + V(x, y)", ("V",)).code == "wrong-arity"


@pytest.mark.parametrize("text", ["exp(exp(3))*x", "2^512*x", "x^10000", "hbar^8*x", "exp(10^6)"])
def test_just_inside_the_limits(text: str) -> None:
    names = NAMES | {"hbar": Rational("1.054571817e-34")}
    assert read_formula(text, names, (), pointer="").free_symbols <= {x}


def test_long_and_deep_formulas_are_quick() -> None:
    terms = [f"{1 + i / 7:.6f}*x^{i % 40}*y^{i % 37}*z^{i % 11}" for i in range(800)]
    wide = "+".join(terms)[:20_000].rsplit("+", 1)[0]
    deep = "".join("y+x*(" for _ in range(100)) + "1" + ")" * 100
    assert len(wide) > 15_000
    for text, slowest in ((wide, 1.0), ("+".join(["x"] * 10_000), 1.0), (deep, 0.3)):
        begun = time.process_time()
        read(text)
        assert time.process_time() - begun < slowest


def test_nested_functions_do_not_blow_up() -> None:
    begun = time.process_time()
    for name in ("abs", "sign", "tanh", "sqrt"):
        read(f"{name}(x-" * LIMITS.calls + "y" + ")" * LIMITS.calls)
        assert refused(f"{name}(x-" * 100 + "y" + ")" * 100).code == "too-deep"
    read("abs((sqrt(x)+y+z+a+b)^60+1)")
    assert time.process_time() - begun < 1.0


def test_brackets_have_a_limit() -> None:
    read("(" * LIMITS.brackets + "x" + ")" * LIMITS.brackets)
    error = refused("(" * (LIMITS.brackets + 1) + "x" + ")" * (LIMITS.brackets + 1))
    assert (error.code, error.position) == ("too-deep", LIMITS.brackets)


@pytest.mark.parametrize("text", [3, None, ["x"], b"x"])
def test_only_text_is_read(text: object) -> None:
    with pytest.raises(InputError, match="a formula is a string"):
        read_formula(text, NAMES, (), pointer="/hamiltonian")
