"""From the bytes of a request to the problem that ``hjsolve.reading`` reads; pure functions."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any, TypeVar

from pydantic import BaseModel, ValidationError

from api.errors import Problem, Refused
from api.schemas import ActionsRequest, ProblemRequest, TransformationRequest
from api.scope import refuse_beyond_scope
from api.strict_json import NotJSON, read_json
from hjsolve.errors import InputError

#: Members of the object posted; more are refused before each is looked at.
MEMBERS = 64
ALSO_NAMED = 20

Model = TypeVar("Model", bound=BaseModel)


def read_request(body: bytes) -> dict[str, Any]:
    """The problem of a request, every number in it as exact text.

    Raises:
        Refused: 400 when the body is no JSON, 422 when it is no problem.
    """
    request = _read(body, ProblemRequest, refuse_beyond_scope)
    return request.model_dump(exclude_none=True, exclude={"parameter_conditions"})


def read_motion_request(body: bytes, model: type[ActionsRequest]) -> dict[str, Any]:
    """A request for actions or a trajectory, the numbers in it as exact text.

    Raises:
        Refused: 400 when the body is no JSON, 422 when it is no such request.
    """
    return _read(body, model, lambda value: None).model_dump()


def read_transformation_request(body: bytes) -> dict[str, Any]:
    """The transformation of a request, every number in it as exact text.

    Raises:
        Refused: 400 when the body is no JSON, 422 when it is no transformation.
    """
    request = _read(body, TransformationRequest, lambda value: None)
    return request.model_dump(exclude_none=True)


def _read(body: bytes, model: type[Model], refuse: Callable[[dict[str, Any]], None]) -> Model:
    try:
        value = read_json(body)
        if not isinstance(value, dict):
            raise InputError("An object was expected.", code="wrong-type")
        if len(value) > MEMBERS:
            raise InputError(f"There are {len(value)} members, most without a meaning.")
        refuse(value)
        return model.model_validate(value)
    except NotJSON as error:
        position = {} if error.position is None else {"position": error.position}
        raise Refused(Problem("not-json", str(error), position)) from None
    except InputError as error:
        raise Refused(input_problem(vars(error))) from None
    except ValidationError as error:
        raise Refused(_validation_problem(error, model)) from None


def input_problem(members: Mapping[str, Any]) -> Problem:
    """The problem that the members of an ``InputError`` describe."""
    names = ("pointer", "position", "expected", "code")
    told = {name: members[name] for name in names if members.get(name) is not None}
    return Problem("not-a-problem", members["detail"], told)


def json_pointer(location: Sequence[str | int]) -> str:
    """RFC 6901 pointer of a place in a document, from where pydantic says it is."""
    return "".join(
        "/" + str(each).replace("~", "~0").replace("/", "~1")
        for each in location
        if each != "[key]"
    )[:500]


def _validation_problem(error: ValidationError, model: type[BaseModel]) -> Problem:
    first, *others = error.errors(include_url=False, include_context=False, include_input=False)
    message = first["msg"]
    if first["type"] == "extra_forbidden":
        message = "no such member"
        if len(first["loc"]) == 1:
            message += f"; there are {', '.join(model.model_fields)}"
    members: dict[str, Any] = {"pointer": json_pointer(first["loc"]), "code": first["type"]}
    if others:
        members["also"] = [json_pointer(each["loc"]) for each in others[:ALSO_NAMED]]
    return Problem("not-a-problem", f"{message[:1].upper()}{message[1:].rstrip('.')}.", members)
