"""Fields have names that people find again on the page."""

import pytest

from web.form.spoken import spoken

FIELDS = {"unknowns.3.name": "y", "endpoints.2.formula": "a", "endpoints.5.formula": "b", "constants.0.value": "1"}


@pytest.mark.parametrize(
    ("field", "name"),
    [
        ("title", "Title"),
        ("functional.integrand", "Integrand"),
        ("endpoints.5.formula", "Endpoints 2"),
        ("unknowns.3.unit", "Unknowns y, unit"),
        ("unknowns.3.name", "Unknowns y"),
        ("constants.0.value", "Constants 1"),
        ("constraints.0.formula", "Constraints 1"),
        ("json", ""),
        ("", ""),
    ],
)
def test_a_field_is_called_by_its_place(field, name):
    assert spoken(field, FIELDS) == name
