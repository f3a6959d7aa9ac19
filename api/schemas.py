"""The request as pydantic sees it; the only pydantic models of the project."""

from __future__ import annotations

from decimal import Decimal
from typing import Annotated, Any

from pydantic import BaseModel, ConfigDict, Field, PlainValidator, WithJsonSchema, model_validator
from pydantic_core import PydanticCustomError

#: Above what reading takes (see ``hjsolve.reading``); it says so better than this can.
FORMULA_CHARACTERS = 200_000
NAME_CHARACTERS = 200
#: A number whose decimal point stands further out than this is no physical parameter.
DECIMAL_PLACES = 400
#: States made in one call.
TIMES = 1_000_000
#: Start states looked at in one call.
CASES = 10_000

SIGNS = ("positive", "negative", "nonzero", "real")
DOMAINS = ("line", "half-line", "angle", "polar-angle")


def _exact(value: Any, wanted: str) -> str:
    """A number as exact text, the form in which ``hjsolve`` takes it."""
    if isinstance(value, bool) or not isinstance(value, (int, Decimal, str)):
        raise PydanticCustomError("exact", "{wanted} was expected", {"wanted": wanted})
    if isinstance(value, str):
        if len(value) > FORMULA_CHARACTERS:
            raise PydanticCustomError("exact", "the text is too long")
        return value
    if isinstance(value, Decimal):
        if value and abs(value.adjusted()) > DECIMAL_PLACES:
            raise PydanticCustomError("exact", "the number is out of range")
        return format(value, "f")
    return str(value)


def _parameter(value: Any) -> str:
    return _exact(value, 'a sign ("positive", "negative", "nonzero", "real") or a number')


def _domain(value: Any) -> str | list[str]:
    if isinstance(value, list) and len(value) == 2:
        return [_exact(each, "a number or a formula") for each in value]
    if isinstance(value, str):
        return value
    wanted = '"line", "half-line", "angle", "polar-angle" or [from, to]'
    raise PydanticCustomError("domain", "{wanted} was expected", {"wanted": wanted})


Name = Annotated[str, Field(min_length=1, max_length=NAME_CHARACTERS)]
_number = {"oneOf": [{"type": "number"}, {"type": "string", "examples": ["3/7"]}]}
ParameterValue = Annotated[
    str,
    PlainValidator(_parameter),
    WithJsonSchema(
        {
            "oneOf": [
                {"type": "string", "enum": list(SIGNS)},
                {"type": "number"},
                {"type": "string", "description": "an exact number", "examples": ["3/7"]},
            ]
        }
    ),
]
DomainValue = Annotated[
    str | list[str],
    PlainValidator(_domain),
    WithJsonSchema(
        {
            "oneOf": [
                {"type": "string", "enum": list(DOMAINS)},
                {"type": "array", "items": _number, "minItems": 2, "maxItems": 2},
            ]
        }
    ),
]

EXAMPLES: dict[str, dict[str, Any]] = {
    "Kepler": {
        "summary": "Kepler's problem in polar coordinates",
        "value": {
            "coordinates": ["r", "theta"],
            "momenta": ["p_r", "p_theta"],
            "hamiltonian": "p_r**2/(2*m) + p_theta**2/(2*m*r**2) - k/r",
            "parameters": {"m": "positive", "k": "positive"},
            "domains": {"r": "half-line", "theta": "angle"},
        },
    },
    "oscillator": {
        "summary": "Harmonic oscillator with a number for its mass",
        "value": {
            "coordinates": ["x"],
            "hamiltonian": "p_x**2/(2*m) + k*x**2/2",
            "parameters": {"m": 0.5, "k": "positive"},
        },
    },
    "quartic": {
        "summary": "Two coupled quartic oscillators, which do not separate",
        "value": {
            "coordinates": ["x", "y"],
            "hamiltonian": "(p_x**2 + p_y**2)/2 + x**4 + 3*x**2*y**2 + 8*y**4",
        },
    },
}


class ProblemRequest(BaseModel):
    """A Hamiltonian and what its names mean."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True)

    coordinates: Annotated[list[Name], Field(min_length=1, max_length=64)]
    momenta: Annotated[list[Name], Field(min_length=1, max_length=64)] | None = Field(
        None, description="In the order of the coordinates; `p_<coordinate>` unless given."
    )
    hamiltonian: Annotated[str, Field(max_length=FORMULA_CHARACTERS)]
    parameters: Annotated[dict[Name, ParameterValue], Field(max_length=256)] = Field(
        {}, description="Each name's sign, or its number."
    )
    functions: Annotated[list[Name], Field(max_length=64)] = Field(
        [], description="Names of arbitrary functions that the Hamiltonian uses."
    )
    domains: Annotated[dict[Name, DomainValue], Field(max_length=64)] = Field(
        {}, description="Where a coordinate lives; a line unless given."
    )
    time: Name = "t"
    charts: Annotated[
        Any,
        WithJsonSchema(
            {
                "anyOf": [
                    {"enum": ["as-given", "search"]},
                    {"type": "array", "items": {"type": "string"}, "minItems": 1, "maxItems": 20},
                ]
            }
        ),
    ] = Field(
        "as-given",
        description="Look only at the given coordinates; search all orthogonal coordinate "
        "systems for a Cartesian Hamiltonian |p|²/2m + V; or try the systems named.",
    )
    parameter_conditions: Annotated[Any, WithJsonSchema({"const": False})] = Field(
        False, description="This version works for generic parameters only."
    )


def _numbers(value: Any) -> list[float] | dict[str, Any]:
    wanted = 'a list of numbers or {"from": …, "to": …, "count": …}'
    if isinstance(value, dict) and set(value) == {"from", "to", "count"}:
        ends = [value["from"], value["to"]]
        count = value["count"]
        whole = isinstance(count, int) and not isinstance(count, bool)
        if whole and 1 <= count <= TIMES and all(map(_is_number, ends)):
            return {"from": float(ends[0]), "to": float(ends[1]), "count": count}
    if isinstance(value, list) and 1 <= len(value) <= TIMES and all(map(_is_number, value)):
        return [float(each) for each in value]
    raise PydanticCustomError(
        "times",
        "{wanted} was expected, at most {most}",
        {
            "wanted": wanted,
            "most": TIMES,
        },
    )


def _is_number(value: Any) -> bool:
    if isinstance(value, bool) or not isinstance(value, (int, Decimal)):
        return False
    return bool(abs(Decimal(value)) < Decimal(10) ** 300)


def _plain_number(value: Any) -> str:
    return _exact(value, "a number")


PlainNumber = Annotated[str, PlainValidator(_plain_number), WithJsonSchema(_number)]
Times = Annotated[
    list[float] | dict[str, Any],
    PlainValidator(_numbers),
    WithJsonSchema(
        {
            "oneOf": [
                {"type": "array", "items": {"type": "number"}, "minItems": 1},
                {
                    "type": "object",
                    "required": ["from", "to", "count"],
                    "properties": {
                        "from": {"type": "number"},
                        "to": {"type": "number"},
                        "count": {"type": "integer", "minimum": 1},
                    },
                },
            ]
        }
    ),
]


class Case(BaseModel):
    """Numbers for the parameters, and a start state."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True)

    values: Annotated[dict[Name, PlainNumber], Field(max_length=256)] = Field(
        {}, description="Numbers of the parameters; they override those of the problem."
    )
    start: Annotated[dict[Name, PlainNumber], Field(max_length=256)] = Field(
        description="Every coordinate and momentum, and `time` (0 unless given)."
    )


class ActionsRequest(BaseModel):
    """A start state with the numbers of the parameters, or many such cases."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True)

    values: Annotated[dict[Name, PlainNumber], Field(max_length=256)] = Field(
        {}, description="Numbers of the parameters; they override those of the problem."
    )
    start: Annotated[dict[Name, PlainNumber], Field(max_length=256)] | None = Field(
        None, description="Every coordinate and momentum, and `time` (0 unless given)."
    )
    cases: Annotated[list[Case], Field(min_length=1, max_length=CASES)] | None = Field(
        None, description="A scan, in place of `start`: `values` then hold for all cases."
    )

    @model_validator(mode="after")
    def _one_or_many(self) -> ActionsRequest:
        if (self.start is None) == (self.cases is None):
            raise PydanticCustomError("one_of", "either start or cases is expected")
        return self


class TrajectoryRequest(ActionsRequest):
    """A start state, and the times at which the state is wanted."""

    times: Times
    check: Annotated[bool, Field(strict=True)] = Field(
        False, description="Compare with direct integration of Hamilton's equations."
    )


TRANSFORMATION_EXAMPLES: dict[str, dict[str, Any]] = {
    "oscillator": {
        "summary": "Harmonic oscillator, generating function of kind 1",
        "value": {
            "old": {"coordinates": ["q"], "momenta": ["p"]},
            "new": {"coordinates": ["Q"], "momenta": ["P"]},
            "parameters": {"m": "positive", "omega": "positive"},
            "hamiltonian": "p**2/(2*m) + m*omega**2*q**2/2",
            "generating_function": {"kinds": [1], "function": "m*omega*q**2*cot(Q)/2"},
        },
    },
    "polar": {
        "summary": "Polar coordinates, completed with their momenta",
        "value": {
            "old": {"coordinates": ["x", "y"]},
            "new": {"coordinates": ["r", "theta"]},
            "domains": {"r": "half-line", "theta": "angle"},
            "transformation": {"r": "sqrt(x**2 + y**2)", "theta": "atan2(y, x)"},
        },
    },
}


class Side(BaseModel):
    """The canonical variables of one side."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True)

    coordinates: Annotated[list[Name], Field(min_length=1, max_length=16)]
    momenta: Annotated[list[Name], Field(min_length=1, max_length=16)] | None = Field(
        None, description="In the order of the coordinates; `p_<coordinate>` unless given."
    )


class GeneratingFunctionRequest(BaseModel):
    """A function of the generating variables of its kinds."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True)

    kinds: Annotated[
        list[Annotated[int, Field(ge=1, le=4)]], Field(min_length=1, max_length=16)
    ] = Field(description="For each pair: 1 (q, Q), 2 (q, P), 3 (p, Q), 4 (p, P).")
    function: Annotated[str, Field(max_length=FORMULA_CHARACTERS)]


class FlowRequest(BaseModel):
    """A function of the old variables, and the name of the parameter of its flow."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True)

    function: Annotated[str, Field(max_length=FORMULA_CHARACTERS)]
    parameter: Name


class TransformationRequest(BaseModel):
    """A transformation, by its generating function or by its new variables."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True)

    old: Side | None = None
    new: Side | None = None
    hamiltonian: Annotated[str, Field(max_length=FORMULA_CHARACTERS)] | None = Field(
        None, description="In the old variables."
    )
    generating_function: GeneratingFunctionRequest | None = None
    transformation: (
        Annotated[
            dict[Name, Annotated[str, Field(max_length=FORMULA_CHARACTERS)]],
            Field(min_length=1, max_length=32),
        ]
        | None
    ) = Field(None, description="New variables in the old ones; coordinates alone are completed.")
    generator: FlowRequest | None = Field(
        None, description="The new variables are the old ones moved along the flow of a function."
    )
    then: Annotated[list[dict[str, Any]], Field(max_length=8)] | None = Field(
        None, description="Transformations that follow, each with `new` and how it is made."
    )
    principal_function_of: dict[str, Any] | None = Field(
        None, description="A problem; its principal function is read as a function of kind 2."
    )
    parameters: Annotated[dict[Name, ParameterValue], Field(max_length=256)] | None = Field(
        None, description="Each name's sign, or its number."
    )
    functions: Annotated[list[Name], Field(max_length=64)] | None = Field(
        None, description="Names of arbitrary functions that the formulas use."
    )
    domains: Annotated[dict[Name, DomainValue], Field(max_length=64)] | None = Field(
        None, description="Where a coordinate, old or new, lives; a line unless given."
    )
    time: Name | None = None
    solve: bool = Field(False, description="Queue the problem in the new variables as well.")
