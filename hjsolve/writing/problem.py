"""A problem back to the form it is posted in, and the identity of its content."""

from __future__ import annotations

import base64
import hashlib
import json
from typing import Any

from sympy import Rational

from hjsolve.records import Domain, Hamiltonian
from hjsolve.writing.infix import write_infix


def problem_document(hamiltonian: Hamiltonian) -> dict[str, Any]:
    """The normalised problem: what ``read_problem`` would make the same Hamiltonian of.

    Numeric parameters are already in the formula; they stay listed as exact
    strings.  Domains that are lines are left out, parameters and functions
    are sorted.
    """
    parameters: dict[str, str] = {p.symbol.name: str(p.sign) for p in hamiltonian.parameters}
    parameters.update({name: number_text(value) for name, value in hamiltonian.numbers})
    domains = {
        symbol.name: _domain(domain)
        for symbol, domain in zip(hamiltonian.coordinates, hamiltonian.domains, strict=True)
        if domain.kind != "line"
    }
    return {
        "coordinates": [symbol.name for symbol in hamiltonian.coordinates],
        "momenta": [symbol.name for symbol in hamiltonian.momenta],
        "hamiltonian": write_infix(hamiltonian.expression),
        "parameters": dict(sorted(parameters.items())),
        "functions": sorted(hamiltonian.functions),
        "domains": domains,
        "time": hamiltonian.time.name,
        **_charts(hamiltonian.charts),
    }


def _charts(charts: tuple[str, ...]) -> dict[str, Any]:
    """The member ``charts``, left out for the coordinates as given."""
    if not charts:
        return {}
    return {"charts": "search" if charts == ("search",) else list(charts)}


def number_text(value: Rational) -> str:
    """A rational as the exact string of a request: ``-3/7`` or ``5``."""
    return str(value.p) if value.q == 1 else f"{value.p}/{value.q}"


def _domain(domain: Domain) -> str | list[str]:
    if domain.kind != "interval":
        return domain.kind
    return [write_infix(domain.lower), write_infix(domain.upper)]


def content_id(hamiltonian: Hamiltonian, version: str) -> str:
    """A name for a problem's content under one version of the solver.

    SHA-256 of the normalised problem with sorted keys, 192 bits of it in URL-safe
    base64 (32 characters).  It does not depend on the hash seed: SymPy orders
    the arguments of sums and products by structure.
    """
    text = json.dumps(
        {"problem": problem_document(hamiltonian), "version": version},
        sort_keys=True,
        ensure_ascii=True,
        separators=(",", ":"),
    )
    return base64.urlsafe_b64encode(hashlib.sha256(text.encode()).digest()[:24]).decode()
