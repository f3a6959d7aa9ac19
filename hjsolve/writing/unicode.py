"""An infix text as one line of Unicode for a person: α₁, x², √(…), ≤.

Only signs are changed, never the order of anything, so the line reads as the
infix does.
"""

from __future__ import annotations

import re

_NAMES = (
    "alpha beta gamma delta epsilon zeta eta theta iota kappa lambda mu nu xi pi rho sigma tau "
    "upsilon phi chi psi omega Gamma Delta Theta Lambda Xi Pi Sigma Upsilon Phi Psi Omega"
)
_LETTERS = "αβγδεζηθικλμνξπρστυφχψωΓΔΘΛΞΠΣΥΦΨΩ"
_GREEK = dict(zip(_NAMES.split(" "), _LETTERS, strict=True))
_BELOW = "0123456789aehijklmnoprstuvxβγρφχ"
_SUBSCRIPTS = dict(zip(_BELOW, "₀₁₂₃₄₅₆₇₈₉ₐₑₕᵢⱼₖₗₘₙₒₚᵣₛₜᵤᵥₓᵦᵧᵨᵩᵪ", strict=True))
_SUPERSCRIPTS = str.maketrans("0123456789", "⁰¹²³⁴⁵⁶⁷⁸⁹")
_SIGNS = {"*": "·", "-": "−", "<=": "≤", "sqrt": "√", "infinity": "∞"}
_TOKEN = re.compile(r"\*\*\d+|\*\*|<=|[A-Za-zα-ωΑ-Ω_][\w']*|\d[\d.]*|.", re.DOTALL)


_FUNCTION = re.compile(r"(elliptic|jacobi|carlson|weierstrass|lambert)_\w+")
"""Names of functions that are no letter with an index."""


def unicode_line(text: str) -> str:
    """The infix ``text`` with Unicode signs for what has one."""
    return "".join(_shown(token) for token in _TOKEN.findall(text))


def _shown(token: str) -> str:
    if token.startswith("**"):
        return token[2:].translate(_SUPERSCRIPTS) if len(token) > 2 else "^"
    if token in _SIGNS:
        return _SIGNS[token]
    if token[0].isalpha() and not _FUNCTION.fullmatch(token):
        return _name(token)
    return token


def _name(name: str) -> str:
    base, _, below = name.partition("_")
    base, below = _GREEK.get(base, base), _GREEK.get(below, below)
    if not below:
        return base if "_" not in name else name
    if all(c in _SUBSCRIPTS for c in below):
        return base + "".join(_SUBSCRIPTS[c] for c in below)
    return f"{base}_{below}"
