"""The decoded request -> ``Hamiltonian``.

Every field is checked here, since the command line comes without the service's
models.  A coordinate whose domain is not named is a line: the formula alone is
never taken to settle a domain (1/r does not say that r is a radius, and an
angle kept as a line separates into the same equations).
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from decimal import Decimal
from typing import Literal, cast

from sympy import Expr, I, Pow, Rational, Symbol, acos, asin, oo, pi, preorder_traversal

from hjsolve.errors import InputError
from hjsolve.reading.formula import read_formula
from hjsolve.reading.functions import ANSWER_ONLY, FUNCTIONS
from hjsolve.reading.limits import LIMITS
from hjsolve.reading.numbers import signed
from hjsolve.reading.tokens import is_name
from hjsolve.records import Domain, Hamiltonian, Parameter

FIELDS = (
    "coordinates",
    "momenta",
    "hamiltonian",
    "parameters",
    "functions",
    "domains",
    "time",
    "charts",
)
"""What is read here."""

PASSED_OVER = ("parameter_conditions",)
"""What belongs to the request but is read elsewhere."""

_DOMAINS = {
    "line": Domain(),
    "half-line": Domain("half-line", Rational(0), oo),
    "angle": Domain("angle", Rational(0), 2 * pi),
    "polar-angle": Domain("polar-angle", Rational(0), pi),
}
_SIGNS: dict[str, dict[str, bool]] = {
    "positive": {"positive": True},
    "negative": {"negative": True},
    "nonzero": {"nonzero": True, "real": True},
    "real": {"real": True},
}
_Sign = Literal["positive", "negative", "nonzero", "real"]


def read_problem(problem: Mapping[str, object]) -> Hamiltonian:
    """Read a problem as posted to ``/v1/solutions``.

    Args:
        problem: the decoded JSON object; ``parameter_conditions`` is passed over.

    Returns:
        The Hamiltonian, with numeric parameters put in exactly; parameters,
        numbers and functions are sorted by name, coordinates keep their order.

    Raises:
        InputError: pointing at the field, and into its text where it is a formula.
    """
    if not isinstance(problem, Mapping):
        raise InputError("a problem is an object", expected="a JSON object", code="wrong-type")
    for field in problem:
        if field not in FIELDS + PASSED_OVER:
            raise InputError(
                f"the field {field!r} is unknown; a problem has {', '.join(FIELDS + PASSED_OVER)}",
                pointer=_pointer(field),
                code="unknown-field",
            )
    for field in ("coordinates", "hamiltonian"):
        if problem.get(field) is None:
            raise InputError(
                f"{field} is missing", pointer=f"/{field}", expected=field, code="missing"
            )
    coordinates, momenta = _pairs(problem)
    parameters, numbers = _parameters(problem.get("parameters"))
    functions = _strings(problem.get("functions"), "/functions")
    time = problem.get("time")
    time_name = "t" if time is None else _name(time, "/time")
    _distinct(coordinates, momenta, {**parameters, **numbers}, functions, time_name)
    kinds = _domains_named(problem.get("domains"), coordinates)
    symbols = {name: Symbol(name, real=True) for name in (*coordinates, *momenta, time_name)}
    for name, kind in kinds.items():
        if kind in ("half-line", "polar-angle"):
            symbols[name] = Symbol(name, positive=True)
    kept = tuple(
        Parameter(Symbol(name, **_SIGNS[sign]), cast(_Sign, sign))
        for name, sign in sorted(parameters.items())
    )
    constants: dict[str, Expr] = {p.symbol.name: p.symbol for p in kept} | numbers
    expression = read_formula(
        problem["hamiltonian"], {**constants, **symbols}, functions, pointer="/hamiltonian"
    )
    _refuse_complex(expression)
    _every_momentum(expression, [symbols[name] for name in momenta], coordinates, momenta)
    return Hamiltonian(
        expression=expression,
        coordinates=tuple(symbols[name] for name in coordinates),
        momenta=tuple(symbols[name] for name in momenta),
        domains=tuple(_domain(name, kinds.get(name, "line"), constants) for name in coordinates),
        parameters=kept,
        numbers=tuple(sorted(numbers.items())),
        functions=tuple(sorted(functions)),
        time=symbols[time_name],
        charts=_charts(problem.get("charts")),
    )


def _pointer(*path: object) -> str:
    return "".join("/" + str(step).replace("~", "~0").replace("/", "~1") for step in path)


def _strings(value: object, pointer: str) -> list[str]:
    if value is None:
        return []
    if isinstance(value, str) or not isinstance(value, Sequence):
        raise InputError(
            f"a list of names is expected, not {type(value).__name__}",
            pointer=pointer,
            expected="a list of names",
            code="wrong-type",
        )
    if len(value) > LIMITS.names:
        raise InputError(f"more than {LIMITS.names} names", pointer=pointer, code="too-many-names")
    return [_name(item, f"{pointer}/{place}") for place, item in enumerate(value)]


def _name(value: object, pointer: str) -> str:
    if not isinstance(value, str):
        raise InputError(
            f"a name is a string, not {type(value).__name__}",
            pointer=pointer,
            expected="a name",
            code="wrong-type",
        )
    if not is_name(value):
        raise InputError(
            f"{value[:60]!r} is no name: up to {LIMITS.name_length} ASCII or Greek letters, digits "
            "and _, a letter first",
            pointer=pointer,
            expected="a name",
            code="bad-name",
        )
    if value in FUNCTIONS or value == "pi":
        what = "the constant pi" if value == "pi" else "a function of the grammar"
        raise InputError(
            f"{value!r} is {what}; choose another name",
            pointer=pointer,
            expected="a name that is not taken",
            code="reserved-name",
        )
    if value.startswith("sigma_"):
        raise InputError(
            f"{value!r}: names that begin with sigma_ stand for branch signs in answers; "
            "choose another name",
            pointer=pointer,
            expected="a name that is not taken",
            code="reserved-name",
        )
    return value


def _pairs(problem: Mapping[str, object]) -> tuple[list[str], list[str]]:
    coordinates = _strings(problem["coordinates"], "/coordinates")
    if not coordinates:
        raise InputError("there is no coordinate", pointer="/coordinates", code="empty")
    given = problem.get("momenta")
    if given is None:
        momenta = []
        for place, name in enumerate(coordinates):
            if not is_name(f"p_{name}"):
                raise InputError(
                    f"the name p_{name} is too long for a momentum; give momenta",
                    pointer=f"/coordinates/{place}",
                    code="bad-name",
                )
            momenta.append(f"p_{name}")
        return coordinates, momenta
    momenta = _strings(given, "/momenta")
    if len(momenta) != len(coordinates):
        raise InputError(
            f"{len(coordinates)} coordinate(s) but {len(momenta)} momenta; give one for each, "
            "in the same order",
            pointer="/momenta",
            expected=f"{len(coordinates)} names",
            code="wrong-count",
        )
    return coordinates, momenta


def _parameters(value: object) -> tuple[dict[str, str], dict[str, Rational]]:
    """The parameters kept as letters with their signs, and the numeric ones."""
    if value is None:
        return {}, {}
    if not isinstance(value, Mapping):
        raise InputError(
            f"parameters is an object, not {type(value).__name__}",
            pointer="/parameters",
            expected="an object from names to signs or numbers",
            code="wrong-type",
        )
    if len(value) > LIMITS.names:
        raise InputError(
            f"more than {LIMITS.names} parameters", pointer="/parameters", code="too-many-names"
        )
    letters: dict[str, str] = {}
    numbers: dict[str, Rational] = {}
    for key, what in value.items():
        pointer = _pointer("parameters", key)
        name = _name(key, pointer)
        if isinstance(what, str) and what in _SIGNS:
            letters[name] = what
        else:
            numbers[name] = _number(what, pointer)
    return letters, numbers


def _number(value: object, pointer: str) -> Rational:
    """A number of the request, exact: 0.1 is 1/10."""
    expected = 'positive, negative, nonzero, real, a number, or an exact string such as "3/7"'
    number = None
    if isinstance(value, int) and not isinstance(value, bool):
        # The bound is in bits: str() of a longer integer would raise in Python itself.
        if value.bit_length() > 4 * LIMITS.literal_digits:
            raise InputError("this number is too long", pointer=pointer, code="number-too-large")
        number = Rational(value)
    elif isinstance(value, float) and math.isfinite(value):
        number = signed(repr(value), pointer=pointer)
    elif isinstance(value, Decimal) and value.is_finite():
        number = signed(str(value), pointer=pointer)
    elif isinstance(value, str):
        number = signed(value, pointer=pointer)
    if number is None:
        raise InputError(
            f"{str(value)[:60]!r} is neither a sign nor a number",
            pointer=pointer,
            expected=expected,
            code="bad-parameter",
        )
    return number


def _distinct(
    coordinates: list[str],
    momenta: list[str],
    parameters: Mapping[str, object],
    functions: list[str],
    time: str,
) -> None:
    """Refuse a name that stands for two things."""
    for place, name in enumerate(functions):
        if name in ANSWER_ONLY:
            raise InputError(
                f"{name!r} has a meaning of its own in answers; choose another name",
                pointer=f"/functions/{place}",
                code="reserved-name",
            )
    taken: dict[str, str] = {}
    every = [
        *(("coordinate", name, f"/coordinates/{i}") for i, name in enumerate(coordinates)),
        *(("momentum", name, f"/momenta/{i}") for i, name in enumerate(momenta)),
        *(("parameter", name, _pointer("parameters", name)) for name in parameters),
        *(("function", name, f"/functions/{i}") for i, name in enumerate(functions)),
        ("time", time, "/time"),
    ]
    if len(every) > LIMITS.names:
        raise InputError(
            f"more than {LIMITS.names} names in all", pointer="", code="too-many-names"
        )
    for role, name, pointer in every:
        if name in taken:
            hint = "; name the time otherwise with the field time" if role == "time" else ""
            raise InputError(
                f"the name {name!r} is both {taken[name]} and {role}{hint}",
                pointer=pointer,
                expected="names that differ",
                code="duplicate-name",
            )
        taken[name] = role


def _domains_named(value: object, coordinates: list[str]) -> dict[str, object]:
    if value is None:
        return {}
    if not isinstance(value, Mapping):
        raise InputError(
            f"domains is an object, not {type(value).__name__}",
            pointer="/domains",
            expected="an object from coordinates to domains",
            code="wrong-type",
        )
    for name in value:
        if name not in coordinates:
            raise InputError(
                f"{name!r} is not a coordinate; the coordinates are {', '.join(coordinates)}",
                pointer=_pointer("domains", name),
                expected="a coordinate",
                code="unknown-name",
            )
    return {str(name): kind for name, kind in value.items()}


def _domain(name: str, kind: object, constants: Mapping[str, Expr]) -> Domain:
    pointer = _pointer("domains", name)
    if isinstance(kind, str) and kind in _DOMAINS:
        return _DOMAINS[kind]
    if isinstance(kind, str) or not isinstance(kind, Sequence) or len(kind) != 2:
        raise InputError(
            f"{str(kind)[:60]!r} is no domain",
            pointer=pointer,
            expected=f"{', '.join(_DOMAINS)}, or [from, to]",
            code="bad-domain",
        )
    lower, upper = (_end(end, constants, f"{pointer}/{place}") for place, end in enumerate(kind))
    if (upper - lower).is_nonpositive:
        raise InputError(
            f"the interval from {lower} to {upper} is empty",
            pointer=pointer,
            expected="from < to",
            code="bad-domain",
        )
    return Domain("interval", lower, upper)


def _end(value: object, constants: Mapping[str, Expr], pointer: str) -> Expr:
    if isinstance(value, str):
        return read_formula(value, constants, (), pointer=pointer)
    return _number(value, pointer)


def _charts(value: object) -> tuple[str, ...]:
    """Empty for "as-given" (or nothing), ("search",), or the names of coordinate systems."""
    if value is None or value == "as-given":
        return ()
    if value == "search":
        return ("search",)
    names = value if isinstance(value, list | tuple) and len(value) <= 20 else ()
    if names and all(isinstance(name, str) and 0 < len(name) <= 40 for name in names):
        return tuple(names)
    raise InputError(
        'charts is neither "as-given" nor "search" nor a list of names of coordinate systems',
        pointer="/charts",
        expected='"as-given", "search" or a list of names such as ["polar"]',
        code="wrong-type",
    )


def _refuse_complex(expression: Expr) -> None:
    """Refuse what is real nowhere: a root of a negative number, asin 2, (−1)^x."""
    for part in preorder_traversal(expression):
        negative = isinstance(part, Pow) and part.base.is_negative and not part.exp.is_integer
        inverse = isinstance(part, (asin, acos)) and part.args[0].is_number
        if part is I or negative or (inverse and abs(part.args[0]) > 1):
            raise InputError(
                f"the Hamiltonian holds {part}, which is not real for the signs declared",
                pointer="/hamiltonian",
                expected="a formula that is real somewhere",
                code="not-real",
            )


def _every_momentum(
    expression: Expr, symbols: Sequence[Symbol], coordinates: list[str], momenta: list[str]
) -> None:
    present = expression.free_symbols
    for place, symbol in enumerate(symbols):
        if symbol not in present:
            raise InputError(
                f"the momentum {momenta[place]} does not occur in the Hamiltonian, so "
                f"{coordinates[place]} is a parameter, not a degree of freedom; declare it under "
                "parameters",
                pointer=f"/coordinates/{place}",
                expected=f"a Hamiltonian that depends on {momenta[place]}",
                code="no-momentum",
            )
