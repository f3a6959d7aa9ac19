"""The request as pydantic sees it; the only pydantic models of the project."""

from __future__ import annotations

from decimal import Decimal
from typing import Annotated, Any

from pydantic import BaseModel, ConfigDict, Field, PlainValidator, WithJsonSchema
from pydantic_core import PydanticCustomError

#: Above what reading takes (see ``hjsolve.reading``); it says so better than this can.
FORMULA_CHARACTERS = 200_000
NAME_CHARACTERS = 200
#: A number whose decimal point stands further out than this is no physical parameter.
DECIMAL_PLACES = 400

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
    charts: Annotated[Any, WithJsonSchema({"const": "as-given"})] = Field(
        "as-given", description="This version works in the given coordinates only."
    )
    parameter_conditions: Annotated[Any, WithJsonSchema({"const": False})] = Field(
        False, description="This version works for generic parameters only."
    )
