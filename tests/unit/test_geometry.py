"""Maps of the plane: homographies and page curl go there and back."""

import numpy as np
import pytest

from curvefit.geometry import Warp, arc_length, homography, project, resample

SQUARE = np.array([[0, 0], [100, 0], [100, 80], [0, 80]], float)
SEEN = np.array([[12, 9], [118, 14], [110, 97], [8, 90]], float)


def test_homography_of_four_points_is_exact():
    np.testing.assert_allclose(project(homography(SEEN, SQUARE), SEEN), SQUARE, atol=1e-9)


def test_homography_of_many_points_recovers_the_true_map():
    true = homography(SQUARE, SEEN)
    points = np.random.default_rng(1).uniform(0, 100, (40, 2))
    found = homography(points, project(true, points))
    np.testing.assert_allclose(found, true, rtol=1e-8, atol=1e-10)


@pytest.mark.parametrize("bow", [0.0, 4.0])
def test_warp_and_back(bow):
    bend = np.zeros((10, 2))
    bend[2, 1] = bow  # v^2 term of y: straight lines bow by 4 px
    warp = Warp(homography(SEEN, SQUARE), (100.0, 80.0), bend if bow else None)
    points = np.random.default_rng(2).uniform(0, 80, (50, 2))
    np.testing.assert_allclose(warp.to_panel(warp.to_page(points)), points, atol=1e-6)


def test_resample_keeps_ends_and_length():
    line = np.array([[0, 0], [3, 4], [3, 10]], float)
    dense = resample(line, 0.5)
    np.testing.assert_allclose(dense[[0, -1]], line[[0, -1]])
    assert arc_length(dense)[-1] == pytest.approx(11, abs=1e-2)
    assert np.hypot(*np.diff(dense, axis=0).T).max() <= 0.5 + 1e-9
