"""How a name is taken apart for typesetting: stem, subscripts, primes."""

from __future__ import annotations

import re
from dataclasses import dataclass

LETTERS: dict[str, str] = dict(
    zip(
        "ΓΔΘΛΞΠΣΥΦΨΩαβγδεζηθικλμνξπρςστυφχψω",
        [
            "Gamma",
            "Delta",
            "Theta",
            "Lambda",
            "Xi",
            "Pi",
            "Sigma",
            "Upsilon",
            "Phi",
            "Psi",
            "Omega",
            "alpha",
            "beta",
            "gamma",
            "delta",
            "epsilon",
            "zeta",
            "eta",
            "theta",
            "iota",
            "kappa",
            "lambda",
            "mu",
            "nu",
            "xi",
            "pi",
            "rho",
            "varsigma",
            "sigma",
            "tau",
            "upsilon",
            "phi",
            "chi",
            "psi",
            "omega",
        ],
        strict=True,
    )
)
"""Greek letters to their English words, which are also LaTeX's commands."""

VARIANTS: dict[str, str] = dict(
    zip("ϑϕϖϱϵ", ["vartheta", "varphi", "varpi", "varrho", "varepsilon"], strict=True)
)

WORDS: dict[str, str] = {word: letter for letter, word in LETTERS.items()}

_TAIL = re.compile(r"(.*?)([0-9]*)")


@dataclass(frozen=True, slots=True)
class Parts:
    """A name as stem, subscripts and primes (trailing underscores)."""

    stem: str
    subscripts: tuple[str, ...]
    primes: int


def take_apart(name: str) -> Parts:
    """``p_theta`` -> p with theta below; ``x12`` -> x with 12 below; ``q_`` -> q primed.

    A name with underscores in a row is left whole.
    """
    bare = name.rstrip("_")
    primes = len(name) - len(bare)
    pieces = bare.split("_")
    if not all(pieces):
        return Parts(bare, (), primes)
    below: list[str] = []
    for place, piece in enumerate(pieces):
        match = _TAIL.fullmatch(piece)
        letters, digits = (match.group(1), match.group(2)) if match else (piece, "")
        if place == 0:
            stem = letters or digits
            below.extend([digits] if letters and digits else [])
        else:
            below.append(piece)
    return Parts(stem, tuple(below), primes)
