"""The small pictures: in their frame, in their shape, harmless."""

import re
from xml.etree import ElementTree

import pytest

from web.thumbnails import EDGE, HEIGHT, WIDTH, thumbnail

SEMICIRCLE = [(-1.0, 0.0), (0.0, 1.0), (1.0, 0.0)]


def spots(svg):
    line = ElementTree.fromstring(svg).find("polyline")
    return [tuple(float(number) for number in spot.split(",")) for spot in line.get("points").split()]


def test_a_picture_fills_its_frame():
    (x0, y0), (_, y1), (x2, _) = spots(thumbnail(SEMICIRCLE))
    assert (x0, x2, y1, y0) == (EDGE, WIDTH - EDGE, EDGE, HEIGHT - EDGE)


def test_a_true_shape_has_one_scale():
    (x0, y0), (x1, y1), _ = spots(thumbnail(SEMICIRCLE, true_shape=True))
    assert x1 - x0 == pytest.approx(y0 - y1)


def test_a_depth_grows_downwards():
    (_, y0), (_, y1), _ = spots(thumbnail(SEMICIRCLE, downwards=True))
    assert y1 > y0


@pytest.mark.parametrize("points", [[(0.0, 1.0), (2.0, 1.0)], [(1.0, 0.0), (1.0, 5.0)]])
@pytest.mark.parametrize("true_shape", [False, True])
def test_a_straight_line_stays_in_the_frame(points, true_shape):
    for x, y in spots(thumbnail(points, true_shape=true_shape)):
        assert EDGE <= x <= WIDTH - EDGE
        assert EDGE <= y <= HEIGHT - EDGE


def test_one_point_is_no_curve():
    with pytest.raises(ValueError, match="at least two points"):
        thumbnail([(0.0, 0.0)])


def test_a_title_is_text_for_those_who_cannot_see_the_picture():
    assert 'role="img" aria-label="a &lt;b&gt;"' in thumbnail(SEMICIRCLE, title="a <b>")
    assert 'aria-hidden="true"' in thumbnail(SEMICIRCLE)
    assert not re.search("style=", thumbnail(SEMICIRCLE))
