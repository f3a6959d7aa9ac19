"""Tokens -> tree, by operator precedence with explicit stacks (no recursion).

Loosest to tightest: ``+ -``; ``* /``; a sign in front; ``**`` (from the right).
So ``-x**2`` is ``-(x**2)`` and ``2**-1`` is a half.  Sums and products are kept
n-ary, so that a long sum is built once instead of term by term.
The method is Dijkstra's shunting yard, with one pair of stacks a bracket.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

from hjsolve.errors import InputError
from hjsolve.reading.limits import LIMITS
from hjsolve.reading.tokens import Token

Kind = Literal["number", "name", "call", "sum", "product", "power", "negative"]


@dataclass(slots=True, eq=False)
class Node:
    """A node of the tree.

    ``text`` is the number or name; ``turned`` says of each child of a sum or
    product whether it is subtracted or divided by; ``position`` is the place
    of the first character, ``operator`` that of the sign that made the node.
    """

    kind: Kind
    position: int
    text: str = ""
    children: list[Node] = field(default_factory=list)
    turned: list[bool] = field(default_factory=list)
    operator: int = 0
    closed: bool = False


@dataclass(frozen=True, slots=True)
class _Operator:
    text: str
    rank: int
    position: int


@dataclass(slots=True)
class _Level:
    """What is open inside one bracket (or at the top, where ``call`` is None)."""

    opened: int
    call: Token | None = None
    calls: int = 0
    arguments: list[Node] = field(default_factory=list)
    operands: list[Node] = field(default_factory=list)
    operators: list[_Operator] = field(default_factory=list)


_RANK = {"+": 10, "-": 10, "*": 20, "/": 20, "**": 40}
_LOOSE_SIGN, _TIGHT_SIGN = 15, 30
"""A sign that opens a term applies to the whole product, -x*y = -(x*y).

It is the same number, and SymPy does not multiply the sign into a first factor
that is a sum.  After * / ** the sign must stay with its operand: a/-b*c.
"""


class _Parser:
    """One pass over the tokens of one formula."""

    def __init__(self, words: list[Token], pointer: str) -> None:
        self.words = words
        self.pointer = pointer
        self.levels = [_Level(-1)]
        self.place = 0

    def parse(self) -> Node:
        """The tree of the whole formula."""
        wants_operand = True
        while True:
            word = self.words[self.place]
            self.place += 1
            if wants_operand:
                wants_operand = self._operand(word)
            elif word.kind == "end":
                return self._finish()
            else:
                wants_operand = self._operator(word)

    def _refuse(
        self, detail: str, position: int, code: str, expected: str | None = None
    ) -> InputError:
        return InputError(
            detail, pointer=self.pointer, position=position, expected=expected, code=code
        )

    def _operand(self, word: Token) -> bool:
        """Read where an operand must begin; True if one must still follow."""
        level = self.levels[-1]
        if word.kind == "number":
            level.operands.append(Node("number", word.position, word.text))
            return False
        if word.kind == "name":
            following = self.words[self.place]
            if following.text == "(":
                self.place += 1
                self._open(following, word)
                return True
            level.operands.append(Node("name", word.position, word.text))
            return False
        if word.text == "(":
            self._open(word, None)
            return True
        if word.text in ("+", "-"):
            loose = not level.operators or level.operators[-1].rank < _RANK["*"]
            rank = _LOOSE_SIGN if loose else _TIGHT_SIGN
            self._push(_Operator("neg" if word.text == "-" else "pos", rank, word.position))
            return True
        raise self._missing(word)

    def _missing(self, word: Token) -> InputError:
        expected = "a number, a name or an opening bracket"
        if word.kind == "end" and not word.position:
            return self._refuse("the formula is empty", 0, "empty", expected)
        if word.kind == "end":
            opened = self.levels[-1].opened
            if opened >= 0 and self.words[self.place - 2].text in ("(", ","):
                return self._unclosed()
            blank = len(self.words) == 1
            return self._refuse(
                "the formula is blank" if blank else "the formula ends where a term should follow",
                word.position,
                "empty" if blank else "ends-early",
                expected,
            )
        return self._refuse(
            f"{word.text!r} stands where a term should begin", word.position, "unexpected", expected
        )

    def _open(self, bracket: Token, call: Token | None) -> None:
        if len(self.levels) > LIMITS.brackets:
            raise self._refuse(
                f"more than {LIMITS.brackets} levels of brackets", bracket.position, "too-deep"
            )
        calls = self.levels[-1].calls + (call is not None)
        if call is not None and calls > LIMITS.calls:
            # SymPy asks for the signs inside at every level: 100 nested tanh took 35 s.
            raise self._refuse(
                f"more than {LIMITS.calls} functions are nested here", call.position, "too-deep"
            )
        self.levels.append(_Level(bracket.position, call, calls))

    def _push(self, operator: _Operator) -> None:
        operators = self.levels[-1].operators
        operators.append(operator)
        if len(operators) > LIMITS.signs:
            raise self._refuse(
                f"more than {LIMITS.signs} signs or powers wait for their operand here",
                operator.position,
                "too-deep",
            )

    def _operator(self, word: Token) -> bool:
        """Read where an operator must stand; True if an operand must follow."""
        level = self.levels[-1]
        if word.text in _RANK:
            rank = _RANK[word.text]
            self._reduce(level, rank if word.text != "**" else rank + 1)
            self._push(_Operator(word.text, rank, word.position))
            return True
        if word.text == ")":
            self._close(word)
            return False
        if word.text == ",":
            if level.call is None:
                raise self._refuse(
                    "a comma stands outside the arguments of a function",
                    word.position,
                    "unexpected",
                    "an operator",
                )
            self._reduce(level, 0)
            level.arguments.append(level.operands.pop())
            return True
        raise self._refuse(
            f"an operator is missing before {word.text!r}; write * for a product",
            word.position,
            "implicit-product",
            "an operator such as *",
        )

    def _close(self, word: Token) -> None:
        level = self.levels.pop()
        if not self.levels:
            raise self._refuse(
                "this bracket closes nothing", word.position, "unbalanced", "an operator or the end"
            )
        self._reduce(level, 0)
        node = level.operands.pop()
        if level.call is not None:
            arguments = [*level.arguments, node]
            node = Node("call", level.call.position, level.call.text, arguments)
        node.closed = True
        self.levels[-1].operands.append(node)

    def _finish(self) -> Node:
        if len(self.levels) > 1:
            raise self._unclosed()
        self._reduce(self.levels[0], 0)
        return self.levels[0].operands.pop()

    def _unclosed(self) -> InputError:
        return self._refuse(
            "this bracket is never closed", self.levels[-1].opened, "unbalanced", "a closing )"
        )

    def _reduce(self, level: _Level, rank: int) -> None:
        """Apply the waiting operators that bind at least as tightly as ``rank``."""
        operands = level.operands
        while level.operators and level.operators[-1].rank >= rank:
            operator = level.operators.pop()
            right = operands.pop()
            if operator.text == "neg":
                operands.append(Node("negative", operator.position, children=[right]))
            elif operator.text == "pos":
                operands.append(right)
            elif operator.text == "**":
                operands.append(
                    Node(
                        "power",
                        operands[-1].position,
                        children=[operands.pop(), right],
                        operator=operator.position,
                    )
                )
            else:
                operands.append(_joined(operands.pop(), operator, right))


def _joined(left: Node, operator: _Operator, right: Node) -> Node:
    kind: Kind = "sum" if operator.text in "+-" else "product"
    if left.kind != kind or left.closed:
        left = Node(kind, left.position, children=[left], turned=[False])
        left.operator = operator.position
    turned = operator.text in "-/"
    if kind == "product" and right.kind == "product" and not any(right.turned):
        # 1/(2*(x + 1)) divides by 2 and by x + 1, so that SymPy does not multiply
        # the 2 out.  A bracket that divides is left alone: 1/(1/0) stays refused.
        left.children.extend(right.children)
        left.turned.extend([turned] * len(right.children))
    else:
        left.children.append(right)
        left.turned.append(turned)
    return left


def parse(words: list[Token], pointer: str) -> Node:
    """The tree of a formula.

    Raises:
        InputError: at the token that does not fit, or at the bracket left open.
    """
    return _Parser(words, pointer).parse()
