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


def test_a_mesh_knows_its_intervals_and_points_as_arrays():
    mesh = Mesh((interval(0, 0.0, 1.0, Family.RADAU, 2), interval(1, 0.0, 0.25, Family.GAUSS, 3),
                 interval(1, 0.25, 1.0, Family.RADAU, 1)))  # fmt: skip
    assert mesh.counts.tolist() == [2, 3, 1]
    assert mesh.owner.tolist() == [0, 0, 1, 1, 1, 2]
    assert mesh.stretch.tolist() == [0, 1, 1]
    assert mesh.gauss.tolist() == [False, True, False]
    assert mesh.starts.tolist() == [0.0, 0.0, 0.25]
    assert mesh.widths.tolist() == [1.0, 0.25, 0.75]
    # The two points of the first interval integrate a parabola exactly; the weights of all fill their stretches.
    points = mesh.starts[mesh.owner] + mesh.widths[mesh.owner] * mesh.local
    measures = mesh.widths[mesh.owner] * mesh.weights
    assert measures[:2] @ points[:2] ** 2 == pytest.approx(1 / 3, abs=1e-15)
    np.testing.assert_allclose(np.bincount(mesh.stretch[mesh.owner], measures), 1.0, rtol=1e-15)
