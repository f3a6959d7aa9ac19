"""Every input of ``hostile.json`` is refused at a place, or read to a finite expression."""

from __future__ import annotations

import json
import re
import time
from pathlib import Path

import pytest
from sympy import Expr, I, Symbol, nan, oo, zoo

from hjsolve.errors import InputError
from hjsolve.reading import read_problem
from hjsolve.reading.functions import FUNCTIONS

INPUTS = json.loads((Path(__file__).parent / "hostile.json").read_text(encoding="utf-8"))
SLOWEST = 1.0  # seconds


def problem(text: str) -> dict[str, object]:
    """A problem in which every plain ASCII name of the text is declared.

    Only the first names are: a problem may not have thousands, and that a
    formula has more is itself a ground to refuse it.
    """
    found = re.findall(r"[A-Za-z][A-Za-z0-9_]*", text[:20_000])
    names = [n for n in dict.fromkeys(found) if n not in FUNCTIONS and len(n) <= 40 and n != "p"]
    return {
        "coordinates": ["q"],
        "momenta": ["p"],
        "hamiltonian": text,
        "parameters": {name: "real" for name in names[:250]},
        "time": "t_",
    }


@pytest.mark.parametrize("case", INPUTS, ids=[f"{i}" for i in range(len(INPUTS))])
def test_hostile(case: dict[str, str]) -> None:
    text = case["hamiltonian"]
    request = problem(text)
    begun = time.process_time()
    if case["expect"] == "reject":
        with pytest.raises(InputError) as refusal:
            read_problem(request)
        assert refusal.value.pointer == "/hamiltonian"
        assert refusal.value.position is not None
        assert 0 <= refusal.value.position <= len(text)
        assert refusal.value.code not in ("invalid", "no-momentum")
    else:
        # A formula without p is no Hamiltonian: add the kinetic energy it lacks.
        if not re.search(r"\bp\b", text):
            request["hamiltonian"] = f"{text} + p**2"
        expression = read_problem(request).expression
        assert isinstance(expression, Expr)
        assert not expression.has(zoo, nan, oo, I)
        assert Symbol("p", real=True) in expression.free_symbols
    assert time.process_time() - begun < SLOWEST
