"""What the notes give of curves and pumps wins; everything else stays as read."""

import numpy as np
import pytest
from identify_scene import ModelPump, Scene, family

from curvefit.errors import NotesError
from curvefit.notes import CurveNotes, Notes, PumpNotes

HEAD = ("head", "m", 0.0, 50.0)
EFFICIENCY = ("efficiency", "%", 0.0, 100.0)
pump = ModelPump()


def twin():
    scene = Scene()
    box = scene.box(HEAD, EFFICIENCY, title="n = 1450 rpm")
    box.line(pump.head, label="H")
    box.line(pump.efficiency, axis="right", label="η")
    return scene


def three():
    scene = Scene()
    family(scene.box(HEAD), ["Ø210", "Ø200", "Ø190"], [1.0, 0.95, 0.9])
    return scene


def point_on(scene, k):
    """A point in the middle of a line [page px]."""
    xy = scene.records()[2][k].xy
    return tuple(xy[len(xy) // 2])


def test_a_quantity_given_by_a_point_takes_the_axis_that_shows_it():
    scene = twin()
    x, y = point_on(scene, 0)
    curves, _, _ = scene.read(Notes(curves=(CurveNotes(at=(x, y + 4.0), quantity="efficiency"),)))
    assert curves[0].quantity == "efficiency"
    assert curves[0].value_axis == "A.right"
    assert curves[0].by == "given"
    read, _, _ = scene.read()
    assert curves[1].quantity == read[1].quantity
    np.testing.assert_array_equal(curves[1].value_si, read[1].value_si)
    assert [c.name for c in curves] == ["efficiency", "efficiency 2"]


def test_an_axis_given_by_name():
    curves, _, _ = twin().read(Notes(curves=(CurveNotes(name="head", axis="right"),)))
    assert (curves[0].quantity, curves[0].value_axis) == ("efficiency", "A.right")
    q = curves[0].flow_si * 3600
    np.testing.assert_allclose(curves[0].value_si, 2 * pump.head(q) / 100)


def test_diameter_speed_stages_label_and_pump():
    note = CurveNotes(
        name="head Ø200", diameter_si=0.201, speed_si=24.0, stages=2, label="X", pump="P"
    )
    curves, pumps, _ = three().read(Notes(curves=(note,)))
    given = curves[1]
    assert (given.diameter_si, given.speed_si, given.stages) == (0.201, 24.0, 2)
    assert (given.label, given.pump) == ("X", "P")
    assert [c.by for c in curves] == ["read", "given", "read"]
    assert [round(c.diameter_si * 1000) for c in curves] == [210, 201, 190]
    assert [p.name for p in pumps] == ["1", "P"]


def test_a_level_makes_an_iso_line():
    note = CurveNotes(name="head Ø190", quantity="iso_efficiency", level=70.0)
    curves, _, _ = three().read(Notes(curves=(note,)))
    assert curves[2].iso
    assert curves[2].level_si == pytest.approx(0.7)


def test_a_line_struck_out_is_gone():
    curves, _, _ = three().read(Notes(curves=(CurveNotes(name="head Ø200", drop=True),)))
    assert [c.name for c in curves] == ["head Ø210", "head Ø190"]


def test_a_point_of_a_line_that_was_struck_out_before_is_no_error():
    curves, _, _ = three().read(Notes(curves=(CurveNotes(at=(5.0, 5.0), drop=True),)))
    assert len(curves) == 3


@pytest.mark.parametrize(
    "note", [CurveNotes(name="head Ø999", line=7), CurveNotes(at=(5.0, 5.0), line=7)]
)
def test_a_note_that_matches_nothing_says_what_exists(note):
    with pytest.raises(NotesError) as error:
        three().read(Notes(curves=(note,), file="x.notes.toml"))
    assert error.value.where.line == 7
    assert '"head Ø200"' in str(error.value)


def test_seven_pixels_off_is_not_on_the_line():
    scene = three()
    x, y = point_on(scene, 0)
    near = CurveNotes(at=(x, y - 5.5), label="near")
    assert scene.read(Notes(curves=(near,)))[0][0].label == "near"
    with pytest.raises(NotesError):
        scene.read(Notes(curves=(CurveNotes(at=(x, y - 7.5), label="far"),)))


@pytest.mark.parametrize(
    ("note", "says"),
    [
        (CurveNotes(name="head Ø200", quantity="heat"), "'heat' is not known"),
        (CurveNotes(name="head Ø200", axis="right"), "no value axis 'right'"),
    ],
)
def test_a_note_that_gives_what_cannot_be(note, says):
    with pytest.raises(NotesError, match=says):
        three().read(Notes(curves=(note,)))


def test_pump_notes_win_and_the_rest_is_read():
    notes = Notes(pumps=(PumpNotes(name="K", stages=3, density_si=870.0),))
    curves, (read,), _ = twin().read(notes)
    assert (read.name, read.stages, read.density_si) == ("K", 3, 870.0)
    assert read.speed_si == pytest.approx(1450 / 60)
    assert {c.pump for c in curves} == {"K"}


def test_names_are_stable_and_unique():
    scene = Scene()
    for _ in range(2):
        scene.box(HEAD).line(pump.head)
    names = [c.name for c in scene.read()[0]]
    assert names == ["head", "head 2"]
    assert names == [c.name for c in scene.read()[0]]
