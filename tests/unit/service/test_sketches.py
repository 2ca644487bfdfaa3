"""The pictures of the samples are those of their solutions."""

import pytest

from service import samples
from service.jobs import perform
from service.sketches import drawn, sketches


def test_every_sample_has_a_picture():
    assert set(sketches()) == set(samples.names())


@pytest.mark.parametrize("name", ["hose", "chute", "hose-lengths", "staged-rocket"])
def test_a_picture_shows_the_solution(name):
    result = perform(samples.text(name), lambda event: None, lambda: False)
    sketch = sketches()[name]
    for shown, fresh in zip((sketch.curve, *sketch.others), drawn(name, result), strict=True):
        height = max(y for _, y in shown) - min(y for _, y in shown)
        for (x, y), (fresh_x, fresh_y) in zip(shown, fresh, strict=True):
            assert x == pytest.approx(fresh_x, rel=1e-3)
            assert y == pytest.approx(fresh_y, abs=1e-3 * height)


def test_the_picture_of_a_continuation_is_its_branch_around_the_fold():
    line = sketches()["sleeve-branch"].curve
    distances = [at for at, _ in line]
    # The published greatest ratio of distance and radius, 1.32549 (Bliss 1925, chapter IV; from memory), at 60 mm.
    assert max(distances) == pytest.approx(1.325487 * 60, rel=1e-4)
    assert distances.index(max(distances)) not in (0, len(distances) - 1)
