"""What GET /v1/charts says."""

import pytest
import sympy as sp
from fastapi import FastAPI

from api.routes import charts
from hjsolve.charts import CHARTS
from hjsolve.reading import read_formula

LISTED = charts.charts()["charts"]


def test_every_system_is_listed_once_at_its_address():
    app = FastAPI()
    app.include_router(charts.router)
    assert "/v1/charts" in app.openapi()["paths"]
    assert [entry["name"] for entry in LISTED] == [entry.name for entry in CHARTS]


@pytest.mark.parametrize("entry", LISTED, ids=lambda e: e["name"])
def test_its_formulas_are_of_the_grammar(entry):
    """Written, read again, and the same: the map and the scale factors."""
    system = next(e for e in CHARTS if e.name == entry["name"])
    symbols = {s.name: s for s in (*system.coordinates, *system.shape)}
    names = {"x": sp.Symbol("x", real=True), "y": sp.Symbol("y", real=True)}
    names |= {"z": sp.Symbol("z", real=True), "u": sp.Symbol("u", real=True)} | symbols

    def read(text):
        return read_formula(text, names, ("f", "g", "h"), pointer="/charts")

    for text, e in zip(entry["transformation"].values(), system.place, strict=True):
        assert sp.simplify(read(text) - e) == 0
    for text, e in zip(entry["squared_scale_factors"], system.squares, strict=True):
        assert sp.simplify(read(text) - e) == 0
    assert read(entry["potential"]).has(sp.Function("f"))
    for formula in entry["inverse"].values():
        read(formula if isinstance(formula, str) else formula["root_of"])
