"""Transformations by numbers: differences at 60 digits, independent of the solver."""

import random
from typing import Any

import mpmath
from formula import parse

Values = dict[str, Any]


def value(text: str, at: Values) -> Any:
    """The value of a formula (real branch) with mpmath."""
    return _value(parse(text, []), at)


def _value(node: Any, at: Values) -> Any:
    kind = node[0]
    if kind == "num":
        return mpmath.mpf(int(node[1].p)) / int(node[1].q)
    if kind == "name":
        return mpmath.pi if node[1] == "pi" and "pi" not in at else at[node[1]]
    if kind == "neg":
        return -_value(node[1], at)
    if kind == "call":
        arguments = [_value(x, at) for x in node[2]]
        names = {"abs": mpmath.fabs, "lambert_w": mpmath.lambertw}
        return names.get(node[1], getattr(mpmath, node[1], None))(*arguments)
    left, right = (_value(x, at) for x in node[1:])
    if kind == "**":
        return left**right
    return (
        {"+": left + right, "-": left - right, "*": left * right}[kind]
        if kind != "/"
        else left / right
    )


def slope(text: str, name: str, at: Values) -> Any:
    """The derivative of a formula, by a central difference of fourth order."""
    tree = parse(text, [])
    h = mpmath.mpf(10) ** -12

    def f(k: int) -> Any:
        return _value(tree, {**at, name: at[name] + k * h})

    return (8 * (f(1) - f(-1)) - (f(2) - f(-2))) / (12 * h)


def close(a: Any, b: Any) -> bool:
    """Equal to 30 digits."""
    return bool(abs(a - b) <= mpmath.mpf(10) ** -30 * (1 + abs(a) + abs(b)))


def sample(row: dict[str, Any], seed: int) -> Values:
    """New variables, parameters and time at random: positive, or where the row says."""
    rng = random.Random(f"{row['id']} {seed}")
    request = row["request"]
    at: Values = {}
    names = [*request["new"]["coordinates"], *request["new"]["momenta"], request.get("time", "t")]
    for name in [*names, *request.get("parameters", {})]:
        declared = request.get("parameters", {}).get(name)
        low, high = row.get("sample", {}).get(name, (0.3, 1.3))
        drawn = mpmath.mpf(rng.randint(0, 10**9)) / 10**9
        at[name] = low + (high - low) * drawn
        if declared is not None and declared not in ("positive", "real", "nonzero", "negative"):
            at[name] = value(str(declared), {})
    return at


def kind_variables(request: dict[str, Any], kinds: list[int]) -> list[tuple[str, str, int]]:
    """(generating variable, the variable it determines, the sign of the relation), pair by pair."""
    found = []
    old, new = request["old"], request["new"]
    for k, q, p in zip(kinds, old["coordinates"], old["momenta"], strict=True):
        found.append((q, p, 1) if k in (1, 2) else (p, q, -1))
    for k, Q, P in zip(kinds, new["coordinates"], new["momenta"], strict=True):
        found.append((Q, P, -1) if k in (1, 3) else (P, Q, 1))
    return found
