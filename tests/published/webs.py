"""When are two ways to write down a family of coordinate systems the same?

A system is known by its characteristic tensors at a few points of space; a
family by the span of those of its members.  Two families agree when their
names, their numbers of free letters and these spans do, however their letters
are chosen.  Nothing of the solver is used here but its grammar.
"""

import random

import numpy as np

POINTS = np.random.default_rng(5).uniform(-2, 2, size=(4, 3))
MEMBERS = 24


def outer(a, b):
    return np.outer(a, b) + np.outer(b, a)


def deviator(L, projection):
    """The part of L that is not a multiple of the projection."""
    return L - np.trace(L) / np.trace(projection) * projection


def tensors(family, geometry, n):
    """The characteristic tensors of one member, each flattened over the sample points."""
    g = {k: np.array(v, dtype=float) for k, v in geometry.items()}
    unit = np.eye(n)
    points = POINTS[:, :n]

    def field(L, projection=unit):
        return np.concatenate([deviator(L(x), projection).ravel() for x in points])

    def axes(rows):
        return sum(np.einsum("i,j,k,l", e, e, e, e) for e in rows).ravel()

    def conic(project, kind):
        if kind in ("elliptic", "prolate", "elliptic_cylindrical"):
            one, two = g["foci"]
            return lambda x: outer(project @ (x - one), project @ (x - two))
        if kind in ("parabolic", "parabolic_cylindrical"):
            e = g.get("direction", g.get("axis"))
            if n == 2:
                e = np.array([np.cos(g["axis_angle"]), np.sin(g["axis_angle"])])
            return lambda x: outer(e, project @ (x - g["focus"]))
        return lambda x: np.outer(project @ (x - g["center"]), project @ (x - g["center"]))

    if family == "cartesian" and n == 2:
        turn = float(g["angle"])
        return [axes([[np.cos(turn), np.sin(turn)], [-np.sin(turn), np.cos(turn)]])]
    if family == "cartesian":
        return [axes(g["axes"])]
    if family.endswith("cylindrical"):
        across = unit - np.outer(g["axis"], g["axis"])
        return [axes([g["axis"]]), field(conic(across, family), across)]
    if family in ("polar", "elliptic", "parabolic", "prolate"):
        return [field(conic(unit, family))]
    center = g["center"]
    square = conic(unit, "center")
    if family == "oblate":
        return [field(lambda x: square(x) + g["a"] ** 2 * np.outer(g["axis"], g["axis"]))]
    if family == "ellipsoidal":
        A = sum(a * np.outer(e, e) for a, e in zip(g["a"], g["axes"], strict=True))
        return [field(lambda x: square(x) - A)]
    if family == "paraboloidal":
        e = g["axes"]
        A = sum(a * np.outer(d, d) for a, d in zip(g["bc"], e[:2], strict=True))
        return [field(lambda x: A + outer(e[2], x - center))]
    rows, values = (
        ([g["axis"]], [1.0]) if family == "spherical" else (g["axes"], g["a"] - np.mean(g["a"]))
    )

    def turning(x):
        turns = [np.cross(e, x - center) for e in rows]
        return sum(a * np.outer(j, j) for a, j in zip(values, turns, strict=True))

    # J² belongs to every system about the centre: conical values count up to their mean
    return [field(square), np.concatenate([turning(x).ravel() for x in points])]


def members(family, geometry, free, parameters, n):
    """The tensors of random members: a list of arrays, one an independent tensor."""
    rng = random.Random(len(free))
    drawn = []
    for _ in range(MEMBERS if free else 1):
        at = {**parameters, **{s: rng.uniform(0.3, 1.5) for s in free}}
        values = {k: evaluate(v, at) for k, v in geometry.items()}
        drawn.append(tensors(family, values, n))
    return [np.array(column) for column in zip(*drawn, strict=True)]


def evaluate(formula, at):
    if isinstance(formula, (list, tuple)):
        return [evaluate(f, at) for f in formula]
    return float(formula.evalf(subs=at, chop=True)) if formula.free_symbols else float(formula)


def same_span(a, b):
    ranks = [np.linalg.matrix_rank(m, tol=1e-7 * np.linalg.norm(m, 2)) for m in (a, b)]
    both = np.concatenate([a / np.linalg.norm(a, 2), b / np.linalg.norm(b, 2)])
    return ranks[0] == ranks[1] == np.linalg.matrix_rank(both, tol=1e-7)


def same(one, two, parameters, n):
    """Whether two families (family, geometry, free) are the same systems."""
    if one[0] != two[0] or len(one[2]) != len(two[2]):
        return False
    pairs = zip(members(*one, parameters, n), members(*two, parameters, n), strict=True)
    return all(same_span(a, b) for a, b in pairs)
