"""The pictures of the samples are those of their solutions."""

import pytest

from service import samples
from service.jobs import perform
from service.sketches import drawn, sketches


def test_every_picture_belongs_to_a_sample():
    assert set(sketches()) <= set(samples.names())
    assert len(sketches()) >= 8


@pytest.mark.parametrize("name", ["hose", "chute"])
def test_a_picture_shows_the_solution(name):
    result = perform(samples.text(name), lambda event: None, lambda: False)
    shown, fresh = sketches()[name].curve, drawn(name, result)[0]
    height = max(y for _, y in shown) - min(y for _, y in shown)
    for (x, y), (fresh_x, fresh_y) in zip(shown, fresh, strict=True):
        assert x == pytest.approx(fresh_x, rel=1e-3)
        assert y == pytest.approx(fresh_y, abs=1e-3 * height)
