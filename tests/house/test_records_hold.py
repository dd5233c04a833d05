"""Records keep their promises: shapes are checked, arrays stay read-only through every copy."""

import copy
import pickle

import numpy as np
import pytest

from curvefit.geometry import Warp
from curvefit.records import Axis, Page, Panel, Trace, Word, flag_names


def page() -> Page:
    return Page("a.png", "0" * 64, 1, np.zeros((20, 30, 3), np.uint8), (30, 20))


def panel() -> Panel:
    box = [[0, 0], [10, 0], [10, 10], [0, 10]]
    return Panel("A", page(), box, Warp(np.eye(3), (10.0, 10.0)), ())


@pytest.mark.parametrize("copier", [copy.deepcopy, lambda r: pickle.loads(pickle.dumps(r))])
def test_arrays_stay_read_only(copier):
    trace = Trace("A1", panel(), [[0, 1], [1, 2]], [0.1, 0.1], [0, 1], 3.0, 2.0)
    for record in (trace, copier(trace)):
        for array in (record.flat, record.sigma, record.flags, record.panel.corners):
            with pytest.raises(ValueError, match="read-only"):
                array[0] = 1


def test_wrong_shape_is_refused():
    with pytest.raises(ValueError, match=r"Word\.box has shape \(3, 2\)"):
        Word("10", [[0, 0], [1, 0], [1, 1]])
    with pytest.raises(ValueError, match=r"Trace\.sigma"):
        Trace("A1", panel(), [[0, 1], [1, 2]], [0.1], [0, 1], 3.0, 2.0)


def test_axis_value_and_fraction_are_inverse():
    t = np.linspace(-0.1, 1.1, 7)
    for scale, offset, slope in (("linear", -4.0, 120.0), ("log", 0.3, 2.0)):
        axis = Axis(
            "A.left", "left", "head", "m", "m", scale, offset, slope, np.eye(2), factor=1000.0
        )
        np.testing.assert_allclose(axis.fraction(axis.value(t)), t, atol=1e-12)


def test_word_reads_upwards():
    word = Word("Head [m]", [[10, 90], [10, 30], [22, 30], [22, 90]])
    assert word.angle == pytest.approx(90)
    assert (word.width, word.height) == (60, 12)


def test_flag_names():
    assert flag_names(0) == ""
    assert flag_names(5) == "bridged bundled"
