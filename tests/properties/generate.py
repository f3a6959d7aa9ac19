"""Random Hamiltonians whose separability is known by how they are built.

Three shapes that separate completely: Stäckel systems (a random matrix whose rows are
functions of one coordinate each; H by Cramer's rule), nests G1(q1, p1, G2(q2, p2, …)) of sums,
products and quotients, and direct sums; and nests around a coupled pair, which separate partly.
Then, at random: terms linear in the momenta, p**4 and cosh(p), arbitrary functions, a monotonic
wrap of the whole, a factor of time, identities that vanish, and in half of the cases a generic
coupling of two coordinates with a factor down to 1e-18.
"""

from __future__ import annotations

import random
from dataclasses import dataclass
from typing import Any

import flint
from formula import evaluate, parse

FUNCTIONS = ["U", "V", "W"]
POOL = (
    "{q}", "{q}**2", "{q}**3", "exp({q})", "exp(-{q}/2)", "cos({q})", "sin(2*{q})",
    "1/(3 + {q}**2)", "sqrt(1 + {q}**2)", "cosh({q})", "2", "1", "log(5 + {q})", "3/7*{q}**4",
    "(2 + {q}**2)**(1/3)", "atan({q})", "abs({q})", "tan({q}/5)", "tanh({q})",
    "1/sqrt(2 + {q}**4)", "(1 + exp({q}))**(5/2)",
)  # fmt: skip
KINETIC = (
    "{p}**2/2", "{p}**2", "{p}**2/2 + {f}*{p}", "({p} - {f})**2", "{p}**4", "cosh({p})",
    "(2 + {f}**2)*{p}**2", "sqrt(1 + {p}**2)", "exp({p})",
)  # fmt: skip
WRAPS = (
    "exp(({h})/50)", "log(2 + ({h})**2)", "sqrt(1 + ({h})**2)", "({h})**3", "1/(7 + ({h}))",
    "({h}) + ({h})**2/9",
)  # fmt: skip
ZEROS = (
    "({a} + {b})**2 - {a}**2 - 2*{a}*{b} - {b}**2",
    "sin({a} + {b}) - sin({a})*cos({b}) - cos({a})*sin({b})",
    "exp({a} + {b}) - exp({a})*exp({b})",
    "({a}**3 - {b}**3)/(({a} - {b})*1) - {a}**2 - {a}*{b} - {b}**2",
    "cosh({a} - {b}) - cosh({a})*cosh({b}) + sinh({a})*sinh({b})",
    "(1/10 + 0.2 - 0.3)*{a}*{b}",
    "sqrt((1 + {a}**2)*(1 + {b}**2)) - sqrt(1 + {a}**2)*sqrt(1 + {b}**2)",
    "sqrt(1 + {a}**2 + {b}**2 + {a}**2*{b}**2) - sqrt(1 + {a}**2)*sqrt(1 + {b}**2)",
    "log((1 + {a}**2)*(1 + {b}**2)) - log(1 + {a}**2) - log(1 + {b}**2)",
    "((1 + {a}**2)*(2 + {b}**2))**(1/3) - (1 + {a}**2)**(1/3)*(2 + {b}**2)**(1/3)",
    "{a}*(cos({b})**2 + sin({b})**2 - 1)",
    "exp({a}*log(1 + {b}**2)) - (1 + {b}**2)**{a}",
    "{a}*(sqrt(5 + 2*sqrt(6)) - sqrt(2) - sqrt(3))*{b}",
    "tanh({a} + {b})*(1 + tanh({a})*tanh({b})) - tanh({a}) - tanh({b})",
)
COUPLINGS = ("{a}*{b}", "{a}**2*{b}", "{a}*sin({b})", "exp({a}*{b}/5)", "{a}**2*{b}**3", "{pa}*{b}")


@dataclass(frozen=True)
class System:
    """A request and how it was built: ``coupled`` says whether a coupling was added."""

    seed: int
    shape: str
    request: dict[str, Any]
    coupled: bool
    timed: bool


def system(seed: int) -> System:
    """The random Hamiltonian number ``seed``: 2 to 5 degrees of freedom."""
    rng = random.Random(seed)
    names = [f"q{i}" for i in range(1, rng.choice((2, 2, 3, 3, 3, 4, 5)) + 1)]
    shape = rng.choice(("staeckel", "staeckel", "nest", "sum", "pair"))
    build = {"staeckel": _staeckel, "nest": _nest, "sum": _sum, "pair": _pair}[shape]
    h = build(rng, names)
    a, b = rng.sample(names, 2)
    coupled = rng.random() < 0.5
    if coupled:
        size = rng.choice(("1", "1/10**6", "1/10**12", "1/10**18"))
        h = f"{h} + {size}*" + rng.choice(COUPLINGS).format(a=a, b=b, pa=f"p_{a}")
    if rng.random() < 0.4:
        a, b = rng.sample(names, 2)
        h = f"{h} + {rng.choice(('1', '1/3', '7'))}*({rng.choice(ZEROS).format(a=a, b=b)})"
    if rng.random() < 0.3:
        h = rng.choice(WRAPS).format(h=h)
    timed = rng.random() < 0.15
    if timed:
        h = f"(2 + sin(t))*({h})"
    request = {"coordinates": names, "hamiltonian": h, "functions": FUNCTIONS}
    return System(seed, shape, request, coupled or shape == "pair", timed)


def single(rng: random.Random, q: str) -> str:
    """A random function of one coordinate, now and then an arbitrary one."""
    if rng.random() < 0.06:
        return rng.choice(("V({q})", "W(2*{q})", "V({q}**2)")).format(q=q)
    return rng.choice(POOL).format(q=q)


def kinetic(rng: random.Random, q: str) -> str:
    """A random function of one coordinate and its momentum, momentum included."""
    moving = rng.choice(KINETIC).format(p=f"p_{q}", f=f"({single(rng, q)})")
    return f"({moving} + {single(rng, q)})"


def _sum(rng: random.Random, names: list[str]) -> str:
    return " + ".join(kinetic(rng, q) for q in names)


def _pair(rng: random.Random, names: list[str]) -> str:
    a, b, *_ = names
    coupling = rng.choice(("U({a}, {b})", "{a}**2*{b}", "exp({a}*{b})", "sqrt(3 + sin({a} - {b}))"))
    core = f"({kinetic(rng, a)} + {kinetic(rng, b)} + {coupling.format(a=a, b=b)})"
    return _nest(rng, names[2:], core)


def _nest(rng: random.Random, names: list[str], core: str = "") -> str:
    order = rng.sample(names, len(names))
    inner = core or kinetic(rng, order.pop())
    for q in order:
        join = rng.choice(("{k} + ({f})*({h})", "{k}*({h})", "{k}/(9 + ({h})**2)", "({h})/{k}"))
        inner = join.format(k=kinetic(rng, q), f=single(rng, q), h=inner)
    return inner


def _staeckel(rng: random.Random, names: list[str]) -> str:
    while True:
        matrix = [
            [
                "0" if len(names) > 3 and rng.random() < 0.45 else f"({single(rng, q)})"
                for _ in names
            ]
            for q in names
        ]
        cofactors = [_cofactor(matrix, i) for i in range(len(names))]
        whole = " + ".join(
            f"{row[0]}*({c})" for row, c in zip(matrix, cofactors, strict=True) if row[0] != "0"
        )
        if whole and all(_generic(x, names) for x in (*cofactors, whole)):
            terms = (f"{kinetic(rng, q)}*({c})" for q, c in zip(names, cofactors, strict=True))
            return f"({' + '.join(terms)})/({whole})"


def _cofactor(matrix: list[list[str]], row: int) -> str:
    """The cofactor of the first entry of a row, as text."""
    rest = [line[1:] for i, line in enumerate(matrix) if i != row]
    minor = determinant(rest)
    return minor if row % 2 == 0 else f"-({minor})"


def determinant(matrix: list[list[str]]) -> str:
    """A determinant as text, expanded along the first row, zeros left out."""
    if not matrix:
        return "1"
    terms = []
    for k, entry in enumerate(matrix[0]):
        if entry != "0":
            minor = determinant([line[:k] + line[k + 1 :] for line in matrix[1:]])
            if minor != "0":
                terms.append(f"{'-' if k % 2 else '+'}{entry}*({minor})")
    return "".join(terms).removeprefix("+") or "0"


def _generic(text: str, names: list[str]) -> bool:
    """Whether a formula is not zero at a fixed rational point."""
    point = {q: flint.fmpq(17 + 5 * i, 23 + 2 * i) for i, q in enumerate(names)}
    stand_ins = {f: [flint.fmpq(1, 3 + k) for k in range(12)] for f in FUNCTIONS}
    value = evaluate(parse(text, FUNCTIONS), point, stand_ins)
    return bool(abs(flint.acb(value)) > 1e-9)
