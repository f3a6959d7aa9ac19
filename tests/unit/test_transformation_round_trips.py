"""Random generating functions -> transformation -> generating function, checked by numbers."""

import random
import sys
from pathlib import Path

import mpmath
import pytest

sys.path[:0] = [str(Path(__file__).parents[1] / name) for name in ("published", "properties")]

from canonical import kind_variables, slope, value  # noqa: E402

from hjsolve.errors import InputError  # noqa: E402
from hjsolve.transform import document, transform  # noqa: E402

SEEDS = range(12)
OLD, NEW = [("q1", "p1"), ("q2", "p2")], [("Q1", "P1"), ("Q2", "P2")]
LOCAL = (
    *("{x}", "2*{x}", "exp({x})", "{x}**2", "{x}**3"),
    *("sinh({x})", "1/{x}", "log({x})", "tan({x})"),
)
BESIDE = ("0", "{x}**2", "{x}**3/3", "cos({x})", "exp({x})", "t*{x}")


def drawn(seed):
    """A generating function of random kinds that is a sum of products, coupled now and then."""
    rng = random.Random(f"mixed {seed}")
    n = rng.choice((1, 1, 2))
    kinds = [rng.randint(1, 4) for _ in range(n)]
    xs = [old[0] if k in (1, 2) else old[1] for k, old in zip(kinds, OLD, strict=False)]
    Xs = [new[0] if k in (1, 3) else new[1] for k, new in zip(kinds, NEW, strict=False)]
    terms = []
    for x, X in zip(xs, Xs, strict=True):
        if rng.random() < 0.7:
            terms.append(f"{rng.choice(('', 'a*', '-'))}{rng.choice(LOCAL).format(x=x)}*{X}")
        else:
            terms.append(f"{x}*{rng.choice(LOCAL).format(x=X)}")
        terms.append(rng.choice(BESIDE).format(x=rng.choice((x, X))))
    if n == 2:
        coupling = ("0", "b*{x}*{y}", "b*{x}*{Y}", "b*{X}*{Y}", "b*{x}**2*{y}")
        terms.append(rng.choice(coupling).format(x=xs[0], y=xs[1], X=Xs[0], Y=Xs[1]))
    return {
        "old": {"coordinates": [q for q, _ in OLD[:n]], "momenta": [p for _, p in OLD[:n]]},
        "new": {"coordinates": [q for q, _ in NEW[:n]], "momenta": [p for _, p in NEW[:n]]},
        "parameters": {"a": "positive", "b": "positive"},
        "generating_function": {"kinds": kinds, "function": " + ".join(f"({t})" for t in terms)},
    }


def on_the_transformation(request, rng):
    """A point of it: generating variables at random, the others by the relations."""
    kinds, text = request["generating_function"].values()
    at = {name: mpmath.mpf(rng.randint(200, 900)) / 1000 for name in ("a", "b", "t")}
    relations = kind_variables(request, kinds)
    for variable, _, _ in relations:
        at[variable] = mpmath.mpf(rng.randint(200, 900)) / 1000
    for variable, determined, sign in relations:
        at[determined] = sign * slope(text, variable, at)
    return at


def real(text, at):
    try:
        found = value(text, at)
    except (ZeroDivisionError, ValueError):
        return None
    return None if isinstance(found, mpmath.mpc) or not mpmath.isfinite(found) else found


def near(a, b):
    return abs(a - b) < mpmath.mpf(10) ** -20 * (1 + abs(a) + abs(b))


def takes_there(values, at):
    """Whether a map of an answer gives the point; None where one of its formulas is not real."""
    found = {name: real(formula["infix"], at) for name, formula in values.items()}
    if None in found.values():
        return None
    return all(near(v, at[name]) for name, v in found.items())


def check(request, seed):
    """(branches that were looked at, whether the same kinds were found again)."""
    rng = random.Random(f"points {seed}")
    found = document(transform(request), ("infix",))
    assert found["canonical"] is True
    assert all(c["verdict"] != "refuted" for c in found["certificate"]["checks"])
    branches = [found, *found["branches"]]
    points = [on_the_transformation(request, rng) for _ in range(6)]
    met = 0
    for at in points:
        for direction in ("old_in_new", "new_in_old"):
            maps = [b[direction] for b in branches if b[direction] is not None]
            if maps:
                taken = [takes_there(values, at) for values in maps]
                met += sum(t is True for t in taken)
                assert any(taken) or None in taken, (direction, at)
    for g in found["generating_functions"]:
        right = 0
        for at in points:
            relations = kind_variables(request, g["kinds"])
            text = g["function"]["infix"]
            if real(text, at) is None:
                continue
            right += all(near(s * slope(text, v, at), at[d]) for v, d, s in relations)
        top = [at for at in points if _on_the_top_level(request, found, at)]
        assert right or not top or "remark" in g, g
    return met, found


def _on_the_top_level(request, found, at):
    """Whether a point lies on the branch shown first, with all new variables positive."""
    new = request["new"]
    positive = all(at[name] > 0 for name in (*new["coordinates"], *new["momenta"]))
    return positive and bool(found["old_in_new"]) and takes_there(found["old_in_new"], at)


@pytest.fixture(autouse=True)
def fifty_digits():
    with mpmath.workdps(50):
        yield


@pytest.mark.parametrize("seed", SEEDS)
def test_from_function_to_map_and_back(seed):
    request = drawn(seed)
    try:
        met, found = check(request, seed)
    except InputError as refused:
        pytest.skip(f"drawn degenerate: {refused.code}")
    if found["new_in_old"] is None:
        return
    assert met
    again = {k: v for k, v in request.items() if k != "generating_function"}
    again["transformation"] = {s: f["infix"] for s, f in found["new_in_old"].items()}
    back = document(transform(again), ("infix",))
    assert back["canonical"] is True
    kinds = request["generating_function"]["kinds"]
    same = [g for g in back["generating_functions"] if g["kinds"] == kinds]
    rng = random.Random(seed)
    for _ in range(3) if same else ():
        at = on_the_transformation(request, rng)
        text = same[0]["function"]["infix"]
        if _on_the_top_level(request, back, at) and real(text, at):
            for variable, determined, sign in kind_variables(request, kinds):
                assert near(sign * slope(text, variable, at), at[determined])


@pytest.mark.parametrize("seed", SEEDS)
def test_a_map_that_was_spoilt_is_not_canonical(seed):
    request = drawn(f"spoilt {seed}")
    try:
        found = document(transform(request), ("infix",))
    except InputError as refused:
        pytest.skip(f"drawn degenerate: {refused.code}")
    if found["new_in_old"] is None:
        pytest.skip("drawn without a closed form")
    again = {k: v for k, v in request.items() if k != "generating_function"}
    formulas = {s: f["infix"] for s, f in found["new_in_old"].items()}
    first = request["old"]["coordinates"][0], request["old"]["momenta"][0]
    formulas["P1"] = f"({formulas['P1']})*(1 + {first[seed % 2]}**2/10**20)"
    again["transformation"] = formulas
    spoilt = document(transform(again), ("infix",))
    assert spoilt["canonical"] is False
    assert abs(spoilt["obstruction"]["excess"]["mid"]) > spoilt["obstruction"]["excess"]["radius"]
    assert "multiplier" not in spoilt
