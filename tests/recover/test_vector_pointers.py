"""Leader lines and steep iso lines on vector pages."""

import numpy as np
import pytest
from test_vector_charts import read
from vector_scene import Scene, curve_between


def test_bent_leaders_between_labels_and_curves_are_no_curves(tmp_path):
    scene = Scene()
    scene.axes()
    for i in range(2):
        line = curve_between(0.0, 0.8, 0.2 * i)
        scene.curve(line)
        tip = scene.points(line[[100 + 20 * i]])[0]
        bend = tip + np.array([22.0, 20.0])
        scene.draw("0.5 w", np.array([tip, bend, bend + np.array([4.0, 0.0])]))
        scene.text(bend[0] + 6, bend[1] - 3, f"D{200 - 10 * i}")
    *_, traces = read(scene, tmp_path)
    assert len(traces) == 2


def test_a_bent_line_of_few_points_away_from_curve_and_word_stays(tmp_path):
    scene = Scene()
    scene.axes()
    scene.curve(curve_between(0.0, 0.9))
    scene.curve(np.array([[0.1, 0.1], [0.2, 0.2], [0.3, 0.22]]))
    *_, traces = read(scene, tmp_path)
    assert len(traces) == 2


@pytest.mark.parametrize("lean", [0.004, 0.02])
def test_a_steep_line_in_many_small_steps_is_a_curve(tmp_path, lean):
    scene = Scene(decimals=2)
    scene.axes()
    scene.curve(curve_between(0.0, 0.9))
    t = np.linspace(0, 1, 400)
    scene.curve(np.column_stack([0.2 + lean * t**2, 0.9 - 0.45 * t]))
    *_, traces = read(scene, tmp_path)
    assert len(traces) == 2
    assert sum(trace.path for trace in traces) == 1
