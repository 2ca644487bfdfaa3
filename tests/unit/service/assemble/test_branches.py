"""Limits on abs, max and min become limits on their branches, where these say the same."""

import pytest

from tests.unit.service.assemble.stating import stated


def limits(*constraints):
    problem = stated(
        independent={"name": "x", "from": 0, "to": 1}, unknowns={"y": {}}, dynamics=None, endpoints=["y(1) = 1"],
        functional={"seek": "minimum", "integrand": "y'^2 + M^2"}, parameters={"M": {}},
        constraints=list(constraints),
    )  # fmt: skip
    return [(c.label, c.pointer) for c in problem.constraints]


@pytest.mark.parametrize(
    ("constraint", "labels"),
    [
        ("abs(y') <= 1", ["y' <= 1", "y' >= -1"]),
        ("1 >= abs(y')", ["y' <= 1", "y' >= -1"]),
        ("-1 <= -abs(y')", ["y' <= 1", "y' >= -1"]),
        ("abs(y') <= M", ["y' <= M", "-y' <= M"]),
        ("abs(y') - M <= 0", ["y' <= M", "-y' <= M"]),
        ("M >= 2*abs(y')", ["M >= 2*y'", "M >= 2*(-y')"]),
        ("y >= max(y', 1 - x)", ["y >= y'", "y >= 1 - x"]),
        ("y >= abs(x - abs(y'))", ["y >= x - abs(y')", "y >= -(x - y')", "y >= -(x - (-y'))"]),
        ("min(y, 2*y) >= 0.1", ["y >= 0.1", "2*y >= 0.1"]),
        ("abs(max(y, -y')) <= 3", ["y <= 3", "y' >= -3", "max(y, -y') >= -3"]),
    ],
)
def test_every_branch_is_limited(constraint, labels):
    assert limits(constraint) == [(label, "/constraints/0") for label in labels]


@pytest.mark.parametrize(
    "constraint",
    [
        "abs(y') >= 1",
        "abs(y) = 1",
        "max(y, y') >= 0",
        "abs(y) + abs(y') >= 1",
        "1/abs(y) <= 3",
        "x*abs(y) <= 3",
        "y >= abs(x - 1)",
        "y >= max(0.3 - x, x - 0.4)",
    ],
)
def test_what_is_no_limit_on_each_branch_stays(constraint):
    assert limits(constraint) == [(constraint, "/constraints/0")]


def test_only_the_side_that_can_be_is_parted():
    assert [label for label, _ in limits("0.5 <= abs(y) <= 1")] == ["y <= 1", "y >= -1", "0.5 <= abs(y) <= 1"]


def test_sums_of_many_kinks_are_left_as_they_are():
    assert len(limits(" + ".join(["abs(y)"] * 4) + " <= 9")) == 16
    assert len(limits(" + ".join(["abs(y)"] * 5) + " <= 9")) == 1
