"""Text -> tokens: numbers, names and signs, each with its place in the text."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Literal

from hjsolve.errors import InputError
from hjsolve.reading.limits import LIMITS

GREEK = "ΓΔΘΛΞΠΣΦΨΩαβγδεζηθικλμνξπρςστυφχψωϑϕϖϱϵ"
"""Greek letters that may stand in a name.

Capitals drawn like Latin letters (Α, Β, Ε …) and omicron are left out: two
names that look the same would be two symbols.
"""

NAME = re.compile(rf"[A-Za-z{GREEK}][A-Za-z0-9_{GREEK}]*")
NUMBER = re.compile(r"(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_SIGN = re.compile(r"\*\*|[-+*/^(),]")
_SPACE = re.compile(r"[ \t\r\n]+")


@dataclass(frozen=True, slots=True)
class Token:
    """One word of a formula; ``position`` is the 0-based offset of its first character."""

    kind: Literal["number", "name", "sign", "end"]
    text: str
    position: int


def is_name(text: str) -> bool:
    """Whether a text is a well-formed name (it may still be reserved)."""
    return len(text) <= LIMITS.name_length and NAME.fullmatch(text) is not None


def tokens(text: str, pointer: str) -> list[Token]:
    """The tokens of a formula, ``^`` written as ``**``, closed by an ``end`` token.

    Raises:
        InputError: a character that no formula holds, or a name or text too long.
    """
    if len(text) > LIMITS.length:
        raise InputError(
            f"the formula has {len(text)} characters; at most {LIMITS.length} are read",
            pointer=pointer,
            position=LIMITS.length,
            code="too-long",
        )
    found: list[Token] = []
    place = 0
    while place < len(text):
        if space := _SPACE.match(text, place):
            place = space.end()
        elif number := NUMBER.match(text, place):
            found.append(Token("number", number.group(), place))
            place = number.end()
        elif name := NAME.match(text, place):
            if len(name.group()) > LIMITS.name_length:
                raise InputError(
                    f"a name of {len(name.group())} characters; "
                    f"at most {LIMITS.name_length} are read",
                    pointer=pointer,
                    position=place,
                    code="name-too-long",
                )
            found.append(Token("name", name.group(), place))
            place = name.end()
        elif sign := _SIGN.match(text, place):
            word = "**" if sign.group() == "^" else sign.group()
            found.append(Token("sign", word, place))
            place = sign.end()
        else:
            raise _strange(text[place], place, pointer)
    found.append(Token("end", "", len(text)))
    return found


def _strange(character: str, place: int, pointer: str) -> InputError:
    shown = repr(character) if character.isprintable() else f"U+{ord(character):04X}"
    if "\u0370" <= character <= "\u03ff":
        why = "this Greek letter is drawn like a Latin one; write the Latin letter or a longer name"
    elif not character.isascii():
        why = "names are made of ASCII or Greek letters, digits and _"
    elif character == "=":
        why = "a formula is one expression without ="
    elif character in "[]{}":
        why = "only round brackets ( ) group"
    elif character == ".":
        why = "a point belongs to a decimal number such as 0.5"
    else:
        why = "a formula holds numbers, names, + - * / ** ^ ( ) and commas"
    return InputError(
        f"the character {shown} has no meaning in a formula: {why}",
        pointer=pointer,
        position=place,
        expected="a number, a name, an operator or a bracket",
        code="unexpected-character",
    )
