"""Meshes: every stretch is covered, and breaks move with the places."""

import numpy as np
import pytest

from solvers.transcription.collocation import Family, scheme
from solvers.transcription.mesh import Mesh, interval, uniform


def test_uniform_covers_every_stretch():
    mesh = uniform(3, 4, 5)
    assert len(mesh.intervals) == 12
    assert mesh.stretches == 3
    assert mesh.points == 60
    assert mesh.degrees() == (5, 5)
    for stretch in range(3):
        own = [piece for piece in mesh.intervals if piece.stretch == stretch]
        assert own[0].start == 0.0
        assert sum(piece.width for piece in own) == pytest.approx(1.0, abs=1e-15)


def test_breaks_are_fractions_between_the_places():
    mesh = uniform(2, 2, 3)
    np.testing.assert_allclose(mesh.breaks(np.array([1.0, 2.0, 6.0])), [1, 1.5, 2, 4, 6], rtol=1e-15)
    np.testing.assert_allclose(mesh.breaks(np.array([1.0, 0.0, -6.0])), [1, 0.5, 0, -3, -6], rtol=1e-15)


def test_degrees_tell_the_lowest_and_the_highest():
    mesh = Mesh((interval(0, 0.0, 0.5, Family.RADAU, 7), interval(0, 0.5, 1.0, Family.GAUSS, 3)))
    assert mesh.degrees() == (3, 7)
    assert mesh.points == 10


def test_intervals_of_like_degree_share_their_scheme():
    assert interval(0, 0.0, 0.1, Family.GAUSS, 6).scheme is interval(4, 0.3, 0.9, Family.GAUSS, 6).scheme
    assert scheme(Family.GAUSS, 6) is not scheme(Family.RADAU, 6)
