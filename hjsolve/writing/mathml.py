"""Formulas as presentation MathML, on SymPy's printer."""

from __future__ import annotations

import re
from html.entities import html5
from typing import Any
from xml.dom.minidom import Element

from sympy import Expr, Subs, Symbol
from sympy.core.function import AppliedUndef
from sympy.core.relational import Relational
from sympy.printing.mathml import MathMLPresentationPrinter

from hjsolve.writing.depth import deep
from hjsolve.writing.names import WORDS, take_apart

NAMESPACE = "http://www.w3.org/1998/Math/MathML"

_SHOWN = {
    "log": "ln",
    "asinh": "arsinh",
    "acosh": "arcosh",
    "atanh": "artanh",
    "atan2": "atan2",
    "LambertW": "W",
    "jacobi_sn": "sn",
    "jacobi_cn": "cn",
    "jacobi_dn": "dn",
    "jacobi_am": "am",
    "weierstrass_p": "℘",
}
_INDEXED = {
    "carlson_rf": "R_F",
    "carlson_rc": "R_C",
    "carlson_rd": "R_D",
    "carlson_rj": "R_J",
}


class _Printer(MathMLPresentationPrinter):
    """SymPy's printer with this project's names and functions."""

    def _leaf(self, text: str, tag: str = "mi") -> Element:
        element = self.dom.createElement(tag)
        element.appendChild(self.dom.createTextNode(text))
        return element

    def _word(self, word: str) -> Element:
        return self._leaf(WORDS.get(word, word), "mn" if word.isdigit() else "mi")

    def _name(self, name: str) -> Element:
        parts = take_apart(name)
        stem = self._word(parts.stem + "′" * parts.primes if parts.primes else parts.stem)
        if not parts.subscripts:
            return stem
        below = self.dom.createElement("mrow")
        for place, word in enumerate(parts.subscripts):
            if place:
                below.appendChild(self._leaf(",", "mo"))
            below.appendChild(self._word(word))
        element = self.dom.createElement("msub")
        element.appendChild(stem)
        element.appendChild(below)
        return element

    def _print_Symbol(self, sym: Symbol, style: str = "plain") -> Element:
        return self._name(sym.name)

    def _print_Function(self, e: Expr) -> Element:
        name = e.func.__name__
        if isinstance(e, AppliedUndef):
            head = self._name(name)
        elif name in _INDEXED:
            head = self._name(_INDEXED[name])
        elif name in _SHOWN:
            head = self._leaf(_SHOWN[name])
        else:
            return super()._print_Function(e)
        row = self.dom.createElement("mrow")
        row.appendChild(head)
        row.appendChild(self._paren_comma_separated(*e.args))
        return row

    _print_log = _print_Function

    def _print_Subs(self, expr: Subs) -> Element:
        conditions = self.dom.createElement("mrow")
        for place, (variable, point) in enumerate(zip(expr.variables, expr.point, strict=True)):
            if place:
                conditions.appendChild(self._leaf(",", "mo"))
            conditions.appendChild(self._print(variable))
            conditions.appendChild(self._leaf("=", "mo"))
            conditions.appendChild(self._print(point))
        bar = self.dom.createElement("msub")
        bar.appendChild(self._leaf("|", "mo"))
        bar.appendChild(conditions)
        row = self.dom.createElement("mrow")
        row.appendChild(self._print(expr.expr))
        row.appendChild(bar)
        return row


_SETTINGS: dict[str, Any] = {"inv_trig_style": "full", "ln_notation": True}


_ENTITY = re.compile(r"&([A-Za-z]+);")
_XML_OWN = frozenset({"amp", "lt", "gt", "quot", "apos"})


def _numbered(match: re.Match[str]) -> str:
    """SymPy's named entities as numbers: XML knows five names only."""
    if match.group(1) in _XML_OWN:
        return match.group()
    return "".join(f"&#{ord(letter)};" for letter in html5[match.group(1) + ";"])


def write_mathml(formula: Expr | Relational) -> str:
    """The formula as one ``math`` element of presentation MathML, in ASCII."""
    inside = _ENTITY.sub(_numbered, deep(_Printer(_SETTINGS).doprint, formula))
    return f'<math xmlns="{NAMESPACE}">{inside}</math>'
