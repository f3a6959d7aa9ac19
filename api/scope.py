"""What the contract has and this version does not do yet; said in one place."""

from __future__ import annotations

from collections.abc import Mapping

from hjsolve.errors import InputError

PARAMETER_CONDITIONS = (
    "This version works for generic values of the parameters only; leave parameter_conditions out."
)


def refuse_parameter_conditions(value: object) -> None:
    """Take false.

    Raises:
        InputError: it is something else.
    """
    if value is not False:
        raise InputError(
            PARAMETER_CONDITIONS,
            pointer="/parameter_conditions",
            expected="false",
            code="not-in-scope",
        )


def refuse_beyond_scope(problem: Mapping[str, object]) -> None:
    """Refuse what a problem asks beyond this version.

    Raises:
        InputError: see above.
    """
    refuse_parameter_conditions(problem.get("parameter_conditions", False))
