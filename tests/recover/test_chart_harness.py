"""The harness itself: truths of drawn charts lie on the ink, for every look and damage."""

import numpy as np
import pytest
from chart_harness import chart, page_of, panels_of, true_line

LOOKS = ("plotted", "inked", "lettered", "vector")
DAMAGES = ("clean", "scan", "fax", "photo", "copy", "tinted", "turned", "coarse")


def darkness_along(drawn, k=0):
    """Mean ink (0 paper, 1 black) on the true line, and a few pixels beside it."""
    page = page_of(drawn)
    panel = panels_of(drawn.truth, page)[k]
    grey = page.pixels.astype(float).min(2)
    paper = np.percentile(grey, 95)
    across, up = true_line(panel, drawn.truth["panels"][k]["curves"][0])
    on, beside = [], []
    for shift, found in ((0.0, on), (7.0, beside), (-7.0, beside)):
        xy = panel.at(across, up + shift / panel.warp.size[1])
        inside = (xy > 3).all(1) & (xy < np.array(grey.shape[::-1]) - 4).all(1)
        col, row = np.round(xy[inside]).astype(int).T
        found.append(1 - grey[row, col] / paper)
    return float(np.mean(on)), float(np.mean(beside))


@pytest.mark.parametrize("look", LOOKS)
@pytest.mark.parametrize("damage", DAMAGES)
def test_the_truth_lies_on_the_ink(look, damage):
    on, beside = darkness_along(chart("single", 3, look, damage, style=None, mono=True))
    assert on > 0.5
    assert beside < 0.3
    assert on > beside + 0.4


def test_the_centre_of_the_ink_is_the_truth_to_a_fraction_of_a_pixel():
    for look in ("plotted", "inked", "vector"):
        drawn = chart("single", 5, look, "clean", dpi=300, mono=True)
        page = page_of(drawn)
        panel = panels_of(drawn.truth, page)[0]
        ink = 1 - page.pixels.astype(float).mean(2) / 255
        across, up = true_line(panel, drawn.truth["panels"][0]["curves"][0])
        middle = slice(60, 180)
        xy = panel.at(across[middle], up[middle])
        errors = []
        for x, y in xy:
            col = round(x)
            rows = np.arange(round(y) - 6, round(y) + 7)
            weight = ink[rows, col]
            centre = float((weight * rows).sum() / weight.sum())
            # the line's height at the centre of that column
            true = np.interp(col, xy[:, 0], xy[:, 1])
            errors.append(centre - true)
        assert abs(np.median(errors)) < 0.1, look


def test_the_same_seed_draws_the_same_chart():
    first = chart("hill", 9, "inked", "scan")
    assert first.data == chart("hill", 9, "inked", "scan").data
    assert first.data != chart("hill", 10, "inked", "scan").data


def test_efficiency_is_hydraulic_power_over_shaft_power():
    drawn = chart("stacked", 4, units="m3/h")
    head, eta, power, npsh = (p["curves"][0] for p in drawn.truth["panels"])
    flow = np.array(head["flow"][1:]) / 3600
    hydraulic = 998.2 * 9.80665 * flow * np.array(head["value"][1:])
    np.testing.assert_allclose(
        hydraulic / (np.array(power["value"][1:]) * 1e3),
        np.array(eta["value"][1:]) / 100,
        rtol=1e-6,
    )
    assert (np.diff(npsh["value"]) > 0).all()
