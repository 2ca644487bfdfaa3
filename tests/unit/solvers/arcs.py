"""Problems of several arcs with known solutions, for the tests of what deals with arcs."""

from tests.unit.service.assemble import stating


def refraction(**members):
    """The quickest way from (0, 1) to (1, -1) where all is 1.5 times slower below y = 0: sin a1 = 1.5 sin a2."""
    return stating.stated(**{
        "independent": {"name": "x", "from": 0, "to": 1},
        "parameters": {"a": {"within": [0, 1]}},
        "unknowns": {"y": {}},
        "dynamics": None,
        "functional": {"seek": "minimum", "integrand": "n*sqrt(1 + y'^2)"},
        "endpoints": ["y(0) = 1", "y(a) = 0", "y(1) = -1"],
        "arcs": [
            {"name": "air", "from": 0, "to": "a", "where": {"n": "1"}},
            {"name": "glass", "from": "a", "to": 1, "where": {"n": "1.5"}},
        ],
    } | members)  # fmt: skip


def stages(**members):
    """Two burns without drag; 100 kg are dropped between them."""
    return stating.stated(**{
        "independent": {"name": "t", "unit": "s", "from": 0, "to": "T"},
        "constants": {
            "g": "9.81 m/s^2", "c": "2500 m/s", "shell": "100 kg", "start": "1000 kg", "rate": "1 kg/s",
        },
        "parameters": {"t1": {"unit": "s"}, "T": {"unit": "s"}},
        "unknowns": {"v": {"unit": "m/s"}, "m": {"unit": "kg"}},
        "dynamics": ["v' = q*c/m - g", "m' = -q"],
        "functional": {"seek": "maximum", "endpoint": "v(T)"},
        "endpoints": ["v(0) = 0", "m(0) = start", "m(t1-) = 400", "m(t1+) = m(t1-) - shell", "m(T) = 100"],
        "arcs": [
            {"name": "first", "from": 0, "to": "t1", "where": {"q": "20*rate"}},
            {"name": "second", "from": "t1", "to": "T", "where": {"q": "5*rate"}},
        ],
    } | members)  # fmt: skip


def wall(**members):
    """Least effort from rest at 1 to a wall at 0 and, thrown back at the same speed, to rest at 1: twice 3."""
    return stating.stated(**{
        "independent": {"name": "t", "from": 0, "to": 2},
        "parameters": {"h": {"within": [0, 2]}},
        "dynamics": ["x'' = u"],
        "endpoints": ["x(0) = 1", "x'(0) = 0", "x(h) = 0", "x'(h+) = -x'(h-)", "x(2) = 1", "x'(2) = 0"],
        "arcs": [{"name": "there", "from": 0, "to": "h"}, {"name": "back", "from": "h", "to": 2}],
    } | members)  # fmt: skip
