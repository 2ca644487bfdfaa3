"""Observations of several arcs from end to end: the result, its page and its tables of residuals, refusals."""

import csv
import io

import numpy as np
import pytest

PLACES = [10, 25, 40, 55, 70, 80, 95, 110]
HEIGHTS = [2.1, 3.4, 5.1, 6.4, 8.1, 7.0, 4.9, 3.2]

DOCUMENT = {
    "format": 1,
    "title": "A clamp that lets go",
    "independent": {"name": "t", "unit": "s", "from": 0, "to": "end"},
    "unknowns": {"y": {"unit": "mm"}},
    "constants": {"free": "70 s", "end": "2 min"},
    "parameters": {"a": {"unit": "mm"}, "up": {"unit": "mm/s"}, "down": {"unit": "mm/s"}},
    "functional": {"seek": "minimum"},
    "endpoints": ["y(0) = a"],
    "arcs": [
        {"name": "held", "from": 0, "to": "free", "dynamics": ["y' = up"]},
        {"name": "loose", "from": "free", "to": "end", "dynamics": ["y' = -down"]},
    ],
    "observations": [
        {"of": "y", "unit": "mm", "arc": "loose", "points": list(zip(PLACES[5:], HEIGHTS[5:], strict=True))},
        {"of": "y", "unit": "mm", "points": list(zip(PLACES[:5], HEIGHTS[:5], strict=True))},
    ],
}  # fmt: skip


@pytest.fixture(scope="module")
def clamped(post):
    answer = post(DOCUMENT, prefer="wait=60")
    assert answer.status_code == 201, answer.text
    return answer.json()


def test_the_fit_is_the_linear_least_squares_of_the_textbook(client, clamped):
    """Seber, Wild (1989), section 1.2: (X'X)^-1 X'y with the variance s^2 (X'X)^-1 (from memory)."""
    t = np.array(PLACES[5:] + PLACES[:5], dtype=float)
    y = np.array(HEIGHTS[5:] + HEIGHTS[:5])
    model = np.column_stack([np.ones_like(t), np.minimum(t, 70), -np.maximum(t - 70, 0)])
    best, (squares,), *_ = np.linalg.lstsq(model, y, rcond=None)
    covariance = squares / (len(t) - 3) * np.linalg.inv(model.T @ model)
    fit = client.get(clamped["links"]["result"]).json()["observations"]
    assert [fit["parameters"][name]["value"] for name in ("a", "up", "down")] == pytest.approx(best, rel=1e-7)
    assert [fit["parameters"][name]["sigma"] for name in ("a", "up", "down")] == pytest.approx(
        np.sqrt(np.diag(covariance)), rel=1e-6
    )
    assert (fit["points"], fit["degrees_of_freedom"]) == (8, pytest.approx(5))
    late, early = fit["lists"]
    assert (late["place"], early["place"]) == (pytest.approx(PLACES[5:]), pytest.approx(PLACES[:5]))
    assert (late["arc"], early["arc"]) == ("loose", "")
    assert [*late["fitted"], *early["fitted"]] == pytest.approx(model @ best, rel=1e-8)


def test_the_page_and_the_tables_show_residuals_at_their_places(client, clamped):
    page = client.get(clamped["links"]["page"]).text
    assert "Fit to the observations" in page
    assert "y on loose" in page
    answer = client.get(f"/api/v1/runs/{clamped['id']}/observations.csv?list=1")
    assert answer.status_code == 200, answer.text
    heading, *rows = csv.reader(io.StringIO(answer.text))
    assert heading[:2] == ["t [s]", "observed [mm]"]
    assert [float(row[0]) for row in rows] == pytest.approx(PLACES[5:])


def test_the_composer_keeps_the_arc_of_a_list(client, post):
    text = client.get("/compose").text
    assert "observations" in text
    document = DOCUMENT | {"observations": [DOCUMENT["observations"][0] | {"arc": "held"}]}
    answer = post(document)
    assert answer.status_code == 422
    complaints = answer.json()["complaints"]
    assert {(c["pointer"], c["code"]) for c in complaints} == {
        (f"/observations/0/points/{k}", "outside-arc") for k in range(3)
    }
    assert complaints[0]["message"] == "80 is not on the arc held, which ends at free."
