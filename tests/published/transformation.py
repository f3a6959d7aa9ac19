"""Point transformations by numbers: does a Hamiltonian in a chart equal the Cartesian one?"""

import random
from typing import Any

import flint
from formula import evaluate, parse
from oracle import Problem


def difference(request: dict[str, Any], original: dict[str, Any], seed: int) -> flint.arb:
    """|H(q, p) - H₀(x(q), J⁻ᵀ p)| in a ball at a random point of the chart's domain.

    ``original`` has the Cartesian coordinates and Hamiltonian and the map x(q).
    """
    with flint.ctx.workprec(300):
        point = Problem(request).point(random.Random(seed))
        new = request["coordinates"]
        momenta = request.get("momenta") or [f"p_{q}" for q in new]
        values: dict[str, Any] = dict(point)
        jacobian = []
        for x in original["coordinates"]:
            tree = parse(original["map"][x], [])
            values[x] = evaluate(tree, point, {})
            for q in new:
                varied = evaluate(tree, {**point, q: flint.acb_series([point[q], 1, 0])}, {})
                series = isinstance(varied, flint.acb_series)
                jacobian.append(flint.acb(varied[1]) if series else flint.acb(0))
        size = len(new)
        transposed = flint.acb_mat(size, size, jacobian).transpose()
        old = transposed.solve(flint.acb_mat(size, 1, [flint.acb(point[p]) for p in momenta]))
        for i, x in enumerate(original["coordinates"]):
            values[f"p_{x}"] = old[i, 0]
        here = evaluate(parse(request["hamiltonian"], []), point, {})
        there = evaluate(parse(original["hamiltonian"], []), values, {})
        return abs(flint.acb(here) - flint.acb(there))
