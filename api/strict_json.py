"""JSON as RFC 8259 has it, and nothing that Python adds to it."""

from __future__ import annotations

import json
from collections import Counter
from decimal import Decimal, InvalidOperation
from typing import Any

from hjsolve.errors import InputError

NUMBER_CHARACTERS = 1000


class NotJSON(ValueError):
    """The text is no JSON; ``position`` is a 0-based character offset, None if it has none."""

    def __init__(self, detail: str, position: int | None = None) -> None:
        super().__init__(detail)
        self.position = position


def read_json(body: bytes) -> Any:
    """Read JSON, decimal numbers kept exact as ``Decimal``.

    Raises:
        NotJSON: it is none; or a member occurs twice, brackets are nested deeper than the
            interpreter follows, or a text holds half a surrogate pair, which could not be sent
            back in UTF-8.
        InputError: a number is longer than ``NUMBER_CHARACTERS`` or its exponent beyond
            ``Decimal``.
    """
    try:
        value = json.loads(
            body.decode("utf-8"),
            object_pairs_hook=_members,
            parse_constant=_refuse_constant,
            parse_float=_decimal,
            parse_int=_integer,
        )
        json.dumps(value, ensure_ascii=False, default=str).encode("utf-8")
    except json.JSONDecodeError as error:
        detail = f"{error.msg}, at line {error.lineno} column {error.colno}."
        raise NotJSON(detail, error.pos) from None
    except UnicodeDecodeError as error:
        raise NotJSON(f"Not in UTF-8: byte {error.start}.") from None
    except UnicodeEncodeError:
        raise NotJSON("A text holds half a surrogate pair.") from None
    except RecursionError:
        raise NotJSON("The brackets are nested too deep.") from None
    return value


def _members(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    members = dict(pairs)
    if len(members) < len(pairs):
        twice, _ = Counter(key for key, _ in pairs).most_common(1)[0]
        raise NotJSON(f"The member {twice[:200]!a} occurs twice.")
    return members


def _refuse_constant(text: str) -> Any:
    raise NotJSON(f"{text} is not JSON.")


def _integer(text: str) -> int:
    _refuse_long(text)
    return int(text)


def _decimal(text: str) -> Decimal:
    _refuse_long(text)
    try:
        return Decimal(text)
    except InvalidOperation:
        detail = f"The exponent of {text:.50} is out of range."
        raise InputError(detail, code="number-too-large") from None


def _refuse_long(text: str) -> None:
    if len(text) > NUMBER_CHARACTERS:
        detail = f"A number of {len(text)} characters; at most {NUMBER_CHARACTERS} are read."
        raise InputError(detail, code="number-too-long")
