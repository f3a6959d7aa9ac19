"""The cases that the benchmarks share: our own and the published verdicts, and large ones."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

PUBLISHED = Path(__file__).parent.parent / "published"
Case = dict[str, Any]


def listed() -> list[Case]:
    """The entries of own_verdicts.json and verdicts.json, each with id, request, blocks."""
    rows: list[Case] = []
    for name in ("own_verdicts", "verdicts"):
        for row in json.loads((PUBLISHED / f"{name}.json").read_text()):
            rows.append({**row, "id": f"{name}:{row['id']}"})
    return rows


def of_size(n: int) -> list[Case]:
    """Liouville's form, a nest and a ring of springs in ``n`` degrees of freedom."""
    q = [f"q{i}" for i in range(1, n + 1)]
    liouville = (
        "(" + " + ".join(f"p_{x}**2 + {x}**4" for x in q) + ")/("
        + " + ".join(f"{i}*{x}**2" for i, x in enumerate(q, 1)) + " + 1)"
    )  # fmt: skip
    nest = f"p_{q[-1]}**2 + {q[-1]}**4"
    for x in reversed(q[:-1]):
        nest = f"p_{x}**2 + {x}**2*({nest})"
    ring = " + ".join(f"p_{x}**2/2 + exp({x} - {y})" for x, y in zip(q, q[1:] + q[:1], strict=True))
    forms = {"liouville": liouville, "nest": nest, "ring": ring}
    return [
        {
            "id": f"{name}-{n}",
            "blocks": [q] if name == "ring" else [[x] for x in q],
            "separability": "none" if name == "ring" else "complete",
            "request": {"coordinates": q, "hamiltonian": form},
        }
        for name, form in forms.items()
    ]


def large_graph(nodes: int = 2000) -> Case:
    """Three degrees of freedom in a formula of at least ``nodes`` distinct nodes, separable."""
    terms = []
    for k in range(1, nodes // 6):
        x = ("x", "y", "z")[k % 3]
        terms.append(f"sin({k}*{x})**{2 + k % 3}/{k}")
    kinetic = "p_x**2/2 + p_y**2/2 + p_z**2/2"
    return {
        "id": f"graph-{nodes}",
        "separability": "complete",
        "blocks": [["x"], ["y"], ["z"]],
        "request": {
            "coordinates": ["x", "y", "z"],
            "hamiltonian": f"{kinetic} + {' + '.join(terms)}",
        },
    }
