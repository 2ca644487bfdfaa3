"""Short ways to state a problem in a test."""

import json

from service.assemble import assemble
from service.spec import read


def document(**members):
    """A sound document without units, with some members replaced."""
    whole = {
        "format": 1,
        "independent": {"name": "t", "from": 0, "to": 1},
        "unknowns": {"x": {}, "u": {}},
        "dynamics": ["x' = u"],
        "functional": {"seek": "minimum", "integrand": "u^2"},
        "endpoints": ["x(0) = 0", "x(1) = 1"],
    } | members
    return {name: value for name, value in whole.items() if value is not None}


def stated(**members):
    """The problem that `document` states."""
    return assemble(read(json.dumps(document(**members)).encode()))


def shape(**members):
    """The problem of a curve y(x) from 0 to 3 without dynamics, with some members replaced."""
    return stated(
        **{
            "independent": {"name": "x", "unit": "m", "from": 0, "to": 3},
            "unknowns": {"y": {"unit": "m"}},
            "dynamics": None,
            "functional": {"seek": "minimum", "integrand": "sqrt(1 + y'^2)"},
            "endpoints": [],
        }
        | members
    )
