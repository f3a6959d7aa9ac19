r"""Formulas as LaTeX, on SymPy's printer.

Differences from SymPy's defaults: inverse functions are \arcsin and so on, the
logarithm is \ln, names are taken apart by this project's own rule, Jacobi's
functions show their parameter as (u \mid m), Carlson's integrals and ℘ look as
in DLMF 19.16 and 23.2.
"""

from __future__ import annotations

from typing import Any

from sympy import Expr, Symbol
from sympy.core.relational import Relational
from sympy.printing.latex import LatexPrinter

from hjsolve.writing.depth import deep
from hjsolve.writing.names import LETTERS, VARIANTS, WORDS, take_apart


def latex_name(name: str) -> str:
    r"""A name in LaTeX: ``p_theta`` is p_{\theta}, ``alpha_1`` is \alpha_{1}."""
    parts = take_apart(name)
    shown = _word(parts.stem)
    if parts.subscripts:
        shown += "_{" + ",".join(_word(word) for word in parts.subscripts) + "}"
    return shown + "'" * parts.primes


def _word(word: str) -> str:
    if word in WORDS:
        # LaTeX has no \omicron, and none is needed: the reader refuses it.
        return "\\" + word
    if len(word) == 1:
        return _letter(word)
    shown = "".join(_letter(letter) for letter in word)
    return shown if word.isdigit() else rf"\mathrm{{{shown}}}"


def _letter(letter: str) -> str:
    command = LETTERS.get(letter) or VARIANTS.get(letter)
    if command:
        return rf"{{\{command}}}"
    return r"\_" if letter == "_" else letter


class _Printer(LatexPrinter):
    """SymPy's LaTeX printer with this project's names and functions."""

    def _print_Symbol(self, expr: Symbol, style: str = "plain") -> str:
        return latex_name(expr.name)

    def _deal_with_super_sub(self, string: str, style: str = "plain") -> str:
        return latex_name(string)

    def _hprint_Function(self, func: str) -> str:
        return _function(func)

    def _named(self, head: str, expr: Expr, exp: str | None, separator: str = ", ") -> str:
        inside = separator.join(self._print(argument) for argument in expr.args)
        power = f"^{{{exp}}}" if exp is not None else ""
        return rf"{head}{power}\left({inside}\right)"

    def _print_log(self, expr: Expr, exp: str | None = None) -> str:
        return self._named(r"\ln", expr, exp)

    def _print_atan2(self, expr: Expr, exp: str | None = None) -> str:
        return self._named(r"\operatorname{atan2}", expr, exp)

    def _bar(self, name: str, expr: Expr, exp: str | None) -> str:
        return self._named(rf"\operatorname{{{name}}}", expr, exp, r" \mid ")

    def _print_jacobi_sn(self, expr: Expr, exp: str | None = None) -> str:
        return self._bar("sn", expr, exp)

    def _print_jacobi_cn(self, expr: Expr, exp: str | None = None) -> str:
        return self._bar("cn", expr, exp)

    def _print_jacobi_dn(self, expr: Expr, exp: str | None = None) -> str:
        return self._bar("dn", expr, exp)

    def _print_jacobi_am(self, expr: Expr, exp: str | None = None) -> str:
        return self._bar("am", expr, exp)

    def _print_carlson_rf(self, expr: Expr, exp: str | None = None) -> str:
        return self._named("{R_F}", expr, exp)

    def _print_carlson_rc(self, expr: Expr, exp: str | None = None) -> str:
        return self._named("{R_C}", expr, exp)

    def _print_carlson_rd(self, expr: Expr, exp: str | None = None) -> str:
        return self._named("{R_D}", expr, exp)

    def _print_carlson_rj(self, expr: Expr, exp: str | None = None) -> str:
        return self._named("{R_J}", expr, exp)

    def _print_weierstrass_p(self, expr: Expr, exp: str | None = None) -> str:
        first, *rest = (self._print(argument) for argument in expr.args)
        power = f"^{{{exp}}}" if exp is not None else ""
        return rf"\wp{power}\left({first}; {', '.join(rest)}\right)"


_COMMANDS = frozenset(
    [
        "sin",
        "cos",
        "tan",
        "cot",
        "sec",
        "csc",
        "sinh",
        "cosh",
        "tanh",
        "coth",
        "arcsin",
        "arccos",
        "arctan",
        "exp",
        "ln",
        "max",
        "min",
    ]
)


def _function(name: str) -> str:
    if name in _COMMANDS:
        return "\\" + name
    parts = take_apart(name)
    single = len(parts.stem) == 1 or parts.stem in WORDS
    return latex_name(name) if single else rf"\operatorname{{{name.replace('_', chr(92) + '_')}}}"


_SETTINGS: dict[str, Any] = {"inv_trig_style": "full", "ln_notation": True}


def write_latex(formula: Expr | Relational) -> str:
    """The formula in LaTeX, without delimiters."""
    return deep(_Printer(_SETTINGS).doprint, formula)
