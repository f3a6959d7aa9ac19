"""What the contract has and this version does not do yet; said in one place."""

from __future__ import annotations

from collections.abc import Mapping

from hjsolve.errors import InputError

CHARTS = (
    'This version works in the given coordinates only; leave charts out or say "as-given",'
    " and write the Hamiltonian in the coordinates that are to be tried."
)
PARAMETER_CONDITIONS = (
    "This version works for generic values of the parameters only; leave parameter_conditions out."
)


def refuse_charts(value: object) -> None:
    """Take ``"as-given"``.

    Raises:
        InputError: it is something else.
    """
    if value != "as-given":
        raise InputError(CHARTS, pointer="/charts", expected='"as-given"', code="not-in-scope")


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
    refuse_charts(problem.get("charts", "as-given"))
    refuse_parameter_conditions(problem.get("parameter_conditions", False))
