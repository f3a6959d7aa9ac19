"""The decoded request -> ``TransformationProblem``.

What names, domains and parameters may be is the business of the reader of
problems, which is handed in (rooms do not import each other): it reads old and
new variables as one problem.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping, Sequence
from typing import Any, Protocol

from sympy import Expr, Symbol

from hjsolve.errors import InputError
from hjsolve.records import Domain, Frame, Hamiltonian, TransformationProblem
from hjsolve.transformation.relations import KINDS, variables

FIELDS = (
    *("old", "new", "parameters", "functions", "domains", "time", "hamiltonian"),
    *("generating_function", "transformation", "generator"),
)
WAYS = ("generating_function", "transformation", "generator")
"""The fields of which one says what the transformation is."""

ReadProblem = Callable[[Mapping[str, object]], Hamiltonian]


class ReadFormula(Protocol):
    """How ``hjsolve.reading.read_formula`` is called."""

    def __call__(
        self, text: object, names: Mapping[str, Expr], functions: Collection[str], *, pointer: str
    ) -> Expr:
        """Read one formula."""


def read_request(
    request: Mapping[str, Any], read_problem: ReadProblem, read_formula: ReadFormula
) -> TransformationProblem:
    """Read a transformation as posted to ``/v1/transformations``.

    Raises:
        InputError: pointing at the field, and into its text where it is a formula.
    """
    if not isinstance(request, Mapping):
        raise InputError("a transformation is an object", code="wrong-type")
    for field in request:
        if field not in FIELDS:
            detail = f"the field {str(field)[:60]!r} is unknown; there are {', '.join(FIELDS)}"
            raise InputError(detail, pointer=_pointer(field), code="unknown-field")
    sides = {side: _side(request.get(side), side) for side in ("old", "new")}
    n = len(sides["old"][0])
    if len(sides["new"][0]) != n:
        raise InputError(
            f"{n} old coordinate(s) but {len(sides['new'][0])} new; give as many",
            pointer="/new/coordinates",
            code="wrong-count",
        )
    everything = _together(request, sides, read_problem)
    frames = [
        Frame(everything.coordinates[k : k + n], everything.momenta[k : k + n]) for k in (0, n)
    ]
    known: dict[str, Expr] = {p.symbol.name: p.symbol for p in everything.parameters}
    known |= dict(everything.numbers)
    known[everything.time.name] = everything.time
    functions = everything.functions

    def read(text: object, sides: Sequence[Frame], pointer: str) -> Expr:
        names = {s.name: s for side in sides for s in side.variables}
        return read_formula(text, known | names, functions, pointer=pointer)

    def problem(**more: Any) -> TransformationProblem:
        hamiltonian = request.get("hamiltonian")
        h = None if hamiltonian is None else read(hamiltonian, frames[:1], "/hamiltonian")
        domains = zip(everything.coordinates, everything.domains, strict=True)
        kept = tuple((s, d) for s, d in domains if d != Domain())
        parameters = everything.parameters
        return TransformationProblem(
            frames[0], frames[1], kept, parameters, functions, everything.time, h, **more
        )

    given = [f for f in WAYS if request.get(f) is not None]
    if len(given) != 1:
        raise InputError(
            f"one of {', '.join(WAYS)} is expected",
            pointer=f"/{given[0]}" if given else "",
            expected="a generating function, or the new variables in the old ones",
            code="duplicate" if given else "missing",
        )
    if given[0] == "generating_function":
        kinds, function = _function(request["generating_function"], frames, read)
        return problem(kinds=kinds, function=function)
    if given[0] == "generator":
        taken = {s.name: s for f in frames for s in f.variables} | known
        own = {p.symbol for p in everything.parameters}
        parameter = _flow_parameter(request["generator"], taken, own)
        generator = read(request["generator"]["function"], frames[:1], "/generator/function")
        return problem(generator=generator, parameter=parameter)
    formulas, backward = _map(request["transformation"], frames, read)
    return problem(given=formulas, backward=backward)


def _pointer(*path: object) -> str:
    return "".join("/" + str(step).replace("~", "~0").replace("/", "~1") for step in path)


def _side(value: object, side: str) -> tuple[list[object], list[object]]:
    """(coordinates, momenta) of one side, momenta ``p_<coordinate>`` when left out."""
    if not isinstance(value, Mapping):
        what = "is missing" if value is None else "is an object with coordinates and momenta"
        raise InputError(f"{side} {what}", pointer=f"/{side}", code="missing")
    for field in value:
        if field not in ("coordinates", "momenta"):
            detail = f"the field {str(field)[:60]!r} is unknown; there are coordinates, momenta"
            raise InputError(detail, pointer=_pointer(side, field), code="unknown-field")
    names: list[list[object]] = []
    for field in ("coordinates", "momenta"):
        given = value.get(field)
        if given is None and field == "momenta":
            given = [f"p_{q}" for q in names[0]]
        if isinstance(given, str) or not isinstance(given, Sequence) or not given:
            raise InputError(
                f"{field} is a list of names",
                pointer=f"/{side}/{field}",
                expected="a list of names",
                code="wrong-type",
            )
        names.append(list(given))
    if len(names[0]) != len(names[1]):
        raise InputError(
            f"{len(names[0])} coordinate(s) but {len(names[1])} momenta",
            pointer=f"/{side}/momenta",
            code="wrong-count",
        )
    return names[0], names[1]


def _together(
    request: Mapping[str, object],
    sides: Mapping[str, tuple[list[object], list[object]]],
    read_problem: ReadProblem,
) -> Hamiltonian:
    """Both sides read as the variables of one problem, for their names and domains."""
    n = len(sides["old"][0])
    momenta = [*sides["old"][1], *sides["new"][1]]
    pseudo: dict[str, object] = {
        "coordinates": [*sides["old"][0], *sides["new"][0]],
        "momenta": momenta,
        "hamiltonian": " + ".join(str(p) for p in momenta),
    }
    for field in ("parameters", "functions", "domains", "time"):
        if request.get(field) is not None:
            pseudo[field] = request[field]
    try:
        return read_problem(pseudo)
    except InputError as error:
        error.pointer = _moved(error.pointer, n)
        raise


def _moved(pointer: str, n: int) -> str:
    """A pointer into the one problem as a pointer into the request."""
    _, field, *rest = [*pointer.split("/"), ""]
    if field in ("coordinates", "momenta"):
        if rest and rest[0].isdigit():
            place = int(rest[0])
            return f"/{'old' if place < n else 'new'}/{field}/{place % n}"
        return "/old"
    return "" if field == "hamiltonian" else pointer


Read = Callable[[object, Sequence[Frame], str], Expr]


def _function(value: object, frames: Sequence[Frame], read: Read) -> tuple[tuple[int, ...], Expr]:
    if not isinstance(value, Mapping) or set(value) != {"kinds", "function"}:
        raise InputError(
            "a generating function is an object with kinds and function",
            pointer="/generating_function",
            code="wrong-type",
        )
    kinds = value["kinds"]
    n = len(frames[0].coordinates)
    valid = isinstance(kinds, Sequence) and not isinstance(kinds, str) and len(kinds) == n
    if not valid or any(str(k) not in "1234" or not str(k) for k in kinds):
        raise InputError(
            "kinds has a number from 1 to 4 for each pair",
            pointer="/generating_function/kinds",
            expected=f"a list of {n} numbers from {', '.join(map(str, KINDS))}",
            code="bad-kinds",
        )
    read_kinds = tuple(int(str(k)) for k in kinds)
    pointer = "/generating_function/function"
    function = read(value["function"], frames, pointer)
    v = variables(frames[0], frames[1], read_kinds)
    wrong = sorted(s.name for s in function.free_symbols & set(v.determined))
    if wrong:
        raise InputError(
            f"a function of the kinds {list(read_kinds)} depends on "
            f"{', '.join(s.name for s in v.generating)}, not on {', '.join(wrong)}",
            pointer=pointer,
            expected="a function of the variables of its kinds",
            code="wrong-variable",
        )
    return read_kinds, function


def _flow_parameter(
    value: object, taken: Mapping[str, Expr], parameters: Collection[Symbol]
) -> Symbol:
    """The parameter of a flow: one of the parameters, or a new real one."""
    if not isinstance(value, Mapping) or set(value) != {"function", "parameter"}:
        raise InputError(
            "a generator is an object with function and parameter",
            pointer="/generator",
            code="wrong-type",
        )
    name = value["parameter"]
    if not isinstance(name, str) or not name.isidentifier() or len(name) > 40:
        raise InputError(
            "the parameter of the flow is a name", pointer="/generator/parameter", code="bad-name"
        )
    if name in taken and taken[name] not in parameters:
        raise InputError(
            f"the parameter {name!r} of the flow has another meaning",
            pointer="/generator/parameter",
            code="duplicate-name",
        )
    found: Symbol = taken.get(name, Symbol(name, real=True))
    return found


def _map(
    value: object, frames: Sequence[Frame], read: Read
) -> tuple[tuple[tuple[Any, Expr], ...], bool]:
    """The formulas in the order of their variables, and whether they give the old variables."""
    if not isinstance(value, Mapping) or not value:
        raise InputError(
            "a transformation is an object from variables to formulas",
            pointer="/transformation",
            code="wrong-type",
        )
    names = set(map(str, value))
    for backward, (made, source) in ((False, (1, 0)), (True, (0, 1))):
        frame = frames[made]
        every = {s.name for s in frame.variables}
        if not names <= every:
            continue
        coordinates = [s for s in frame.coordinates if s.name not in names]
        momenta = [s for s in frame.momenta if s.name not in names]
        if coordinates or (momenta and len(momenta) != len(frame.momenta)):
            missing = ", ".join(s.name for s in (*coordinates, *momenta))
            raise InputError(
                f"{missing} missing; give all the variables, or the coordinates alone",
                pointer="/transformation",
                code="missing",
            )
        given = [s for s in frame.variables if s.name in names]
        formulas = tuple(
            (s, read(value[s.name], [frames[source]], _pointer("transformation", s.name)))
            for s in given
        )
        _only_coordinates(formulas, frames[source], whole=not momenta)
        return formulas, backward
    unknown = sorted(names - {s.name for f in frames for s in f.variables})
    what = f"{unknown[0]!r} is no variable" if unknown else "old and new variables are mixed"
    raise InputError(
        f"{what}; give the new variables in the old ones",
        pointer=_pointer("transformation", unknown[0]) if unknown else "/transformation",
        expected=", ".join(s.name for s in frames[1].variables),
        code="unknown-name",
    )


def _only_coordinates(formulas: Sequence[tuple[Any, Expr]], source: Frame, *, whole: bool) -> None:
    for s, formula in () if whole else formulas:
        moving = sorted(m.name for m in formula.free_symbols & set(source.momenta))
        if moving:
            raise InputError(
                f"{s.name} depends on {moving[0]}, so this is no point transformation; "
                "give the momenta too",
                pointer=_pointer("transformation", s.name),
                code="wrong-variable",
            )
