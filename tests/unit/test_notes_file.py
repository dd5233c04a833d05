"""The notes file: what is accepted, and errors that name file, line and key."""

import numpy as np
import pytest

from curvefit.errors import NotesError
from curvefit.notes import given_entries, merge, notes_from, read_notes


def test_an_empty_file_gives_nothing(tmp_path):
    path = tmp_path / "n.toml"
    path.write_text("")
    notes = read_notes(path)
    assert (notes.panels, notes.curves, notes.pumps, notes.given) == ((), (), (), {})
    assert notes.page.turn is None


def test_one_line_is_a_whole_file():
    notes = notes_from(
        'axis = [{panel="A", side="bottom", marks=[[412, 1530, 0], [1890, 1530, 120]]}]'
    )
    (panel,) = notes.panels
    (axis,) = panel.axes
    assert (panel.name, axis.name) == ("A", "bottom")
    assert [(m.xy, m.value, m.u) for m in axis.marks] == [
        ((412.0, 1530.0), 0.0, 0.5),
        ((1890.0, 1530.0), 120.0, 0.5),
    ]


def test_every_key_reaches_its_record():
    notes = notes_from(
        """
        [page]
        turn = 3
        [[panel]]
        name = "B"
        corners = [[1, 2], [30, 2], [30, 40], [1, 40]]
        leave_out = [[3, 4, 5, 6]]
        [[axis]]
        name = "B.right.2"
        quantity = "shaft_power"
        unit = "PS"
        scale = "log"
        marks = [{pixel = [1, 2], value = 1, u_px = 0.2}, {pixel = [1, 9], value = 10}]
        [[curve]]
        at = [10, 20]
        quantity = "head"
        axis = "B.left"
        flow_axis = "top"
        diameter = "8 1/2 in"
        speed = "50 Hz"
        stages = 3
        label = "full size"
        pump = "P2"
        leave_out = [1, 1, 2, 2]
        [[curve]]
        path = [[1, 1], [2, 2], [3, 2]]
        quantity = "iso_shaft_power"
        level = "15 kW"
        speed = "90 %"
        by = "given"
        [[pump]]
        name = "P2"
        speed = "2900 rpm"
        stages = 2
        suction_sides = 2
        density = "0.95 kg/l"
        liquid = "brine"
        """
    )
    panel = notes.panels[0]
    axis, (first, second), pump = panel.axes[0], notes.curves, notes.pumps[0]
    assert notes.page.turn == 3
    assert panel.corners[2] == (30.0, 40.0)
    assert panel.leave_out == ((3.0, 4.0, 5.0, 6.0),)
    assert (axis.name, axis.quantity, axis.unit, axis.scale) == (
        "right.2", "shaft_power", "PS", "log")  # fmt: skip
    assert [m.u for m in axis.marks] == [0.2, 0.5]
    assert (first.at, first.axis, first.flow_axis) == ((10.0, 20.0), "left", "top")
    assert first.diameter_si == pytest.approx(8.5 * 0.0254)
    assert (first.diameter_unit, first.speed_si, first.speed_unit) == ("[in_i]", 50.0, "Hz")
    assert first.leave_out == ((1.0, 1.0, 2.0, 2.0),)
    assert (second.level, second.level_unit, second.speed_ratio) == (15.0, "kW", 0.9)
    assert second.path == ((1.0, 1.0), (2.0, 2.0), (3.0, 2.0))
    assert pump.speed_si == pytest.approx(2900 / 60)
    assert (pump.stages, pump.suction_sides, pump.liquid) == (2, 2, "brine")
    assert pump.density_si == pytest.approx(950.0)


WRONG = [
    ("a = ", 1, None, "TOML"),
    ("\n\n[[panl]]\nname = 'A'", 3, "panl", "panel"),
    ("turn = 1", 1, "turn", "Known"),
    ("[page]\nturn = 90", 2, "page.turn", "from 0 to 3"),
    ("[[axis]]\npanel = 'A'\nsid = 'left'", 3, "axis.sid", "side"),
    ("[[axis]]\npanel = 'A'\nside = 'lower'", 3, "axis.side", "bottom"),
    ("[[axis]]\nside = 'left'", 1, "axis", 'panel = "A"'),
    ("[[axis]]\npanel = 'A'", 1, "axis", "side"),
    ("[[axis]]\npanel = 'A'\nside = 'left'\nunit = 'mh'", 4, "axis.unit", "m³/h"),
    ("[[axis]]\npanel='A'\nside='left'\nquantity='head'\nunit='kW'", 5, "axis.unit", "ft"),
    ("[[axis]]\npanel='A'\nside='left'\nquantity='height'", 4, "axis.quantity", "head"),
    ("[[axis]]\npanel='A'\nside='left'\nmarks=[[1, 2, 3]]", 4, "axis.marks", "two"),
    ("[[axis]]\npanel='A'\nside='left'\nmarks=[[1, 2], [3, 4]]", 4, "axis.marks", "value"),
    ("[[axis]]\npanel='A'\nside='left'\nmarks=[[1,2,'a'],[3,4,5]]", 4, "axis.marks", "number"),
    ("[[axis]]\npanel='A'\nside='left'\nmarks=[[1,2,nan],[3,4,5]]", 4, "axis.marks", "number"),
    ("[[axis]]\npanel='A'\nside='left'\nmarks=[[1,2,5],[3,4,5]]", 4, "axis.marks", "own"),
    ("[[axis]]\npanel='A'\nside='left'\nscale='log'\nmarks=[[1,2,0],[3,4,5]]", 5, "axis.marks",
     "value"),
    ("[[axis]]\npanel='A'\nside='left'\n[[axis]]\npanel='A'\nside='left'", 4, "axis", "one"),
    ("axis=[{panel='A', side='left'},{panel='A', sde='top'}]", 1, "axis.sde", "side"),
    ("[[panel]]\ncorners=[[1,2],[3,4]]\nname='A'", 2, "panel.corners", "4 points"),
    ("[[panel]]\ndrop = true", 1, "panel", "name"),
    ("[[panel]]\nname='A'\ndrop = 1", 3, "panel.drop", "true"),
    ("[[panel]]\nname='A'\nleave_out = [[5,5,1,1]]", 3, "panel.leave_out", "left < right"),
    ("[[curve]]\nlabel = 'x'", 1, "curve", "at"),
    ("[[curve]]\nname = 'x'\ndiameter = 210", 3, "curve.diameter", "210 mm"),
    ("[[curve]]\nname = 'x'\ndiameter = '210'", 3, "curve.diameter", "mm"),
    ("[[curve]]\nname = 'x'\ndiameter = '-3 mm'", 3, "curve.diameter", "above zero"),
    ("[[curve]]\nname = 'x'\nspeed = '3 furlong'", 3, "curve.speed", "1/min"),
    ("[[curve]]\nname = 'x'\nquantity = 'flow'", 3, "curve.quantity", "head"),
    ("[[curve]]\nname = 'x'\naxis = 'middle'", 3, "curve.axis", "left"),
    ("[[curve]]\nname = 'x'\nby = 'me'", 3, "curve.by", "given"),
    ("[[curve]]\nname = 'x'\n\n[[curve]]\nname = 'y'\nstages = 1.5", 6, "curve.stages", "whole"),
    ("[[pump]]\nsuction_sides = 3", 2, "pump.suction_sides", "from 1 to 2"),
    ("curve = 3", 1, "curve", "table"),
]  # fmt: skip


@pytest.mark.parametrize(("text", "line", "key", "needed"), WRONG)
def test_an_error_names_file_line_key_and_what_is_right(text, line, key, needed):
    with pytest.raises(NotesError) as caught:
        notes_from(text, file="mine.toml")
    error = caught.value
    assert (error.where.file, error.where.line, error.where.key) == ("mine.toml", line, key)
    assert needed in f"{error.what} {error.remedy}"
    assert error.exit_code == 2


def test_what_read_wrote_is_passed_over():
    text = '[[curve]]\nname = "a"\nlabel = "x"\nby = "read"\n[[curve]]\nname = "b"\nlabel = "y"\n'
    assert [c.name for c in notes_from(text).curves] == ["b"]
    assert given_entries(text) == {"curve": [{"name": "b", "label": "y"}]}


def test_pixels_of_the_stored_picture_become_pixels_of_the_page(made_reading):
    page = made_reading(quarter_turn=True).page  # stored: x' = y, y' = 899 - x
    notes = notes_from("[[curve]]\nat = [100, 700]\nleave_out = [100, 700, 120, 750]", page)
    (curve,) = notes.curves
    assert curve.at == pytest.approx((199.0, 100.0))
    assert curve.leave_out[0] == pytest.approx((149.0, 100.0, 199.0, 120.0))


def test_a_place_far_outside_the_picture_is_refused(made_reading):
    page = made_reading().page
    with pytest.raises(NotesError, match="far outside"):
        notes_from("[[curve]]\nat = [10000, 700]", page)


def test_notes_for_another_picture_are_refused(made_reading):
    page = made_reading().page
    other = f'[source]\nsha256 = "{"0" * 64}"\n'
    assert notes_from(other, page).given == {}, "a mere record does no harm"
    with pytest.raises(NotesError, match="another picture") as caught:
        notes_from(other + '[[curve]]\nname = "a"\nlabel = "b"\n', page)
    assert caught.value.where.key == "source.sha256"


def test_notes_for_another_page_give_nothing(made_reading):
    page = made_reading().page
    text = '[source]\npage = 7\n[[curve]]\nname = "a"\n'
    assert notes_from(text, page).curves == ()


def test_a_missing_notes_file_is_a_wrong_command(tmp_path):
    with pytest.raises(NotesError) as caught:
        read_notes(tmp_path / "none.toml")
    assert "none.toml" in str(caught.value)


def test_the_first_of_two_notes_wins_and_nothing_else_is_lost():
    mark = "marks=[[1,2,0],[1,9,5]]"
    first = notes_from(f"axis=[{{panel='A',side='left',{mark}}}]\ncurve=[{{name='a',label='1'}}]")
    second = notes_from(
        "[page]\nturn = 1\n"
        "[[axis]]\npanel='A'\nside='left'\nunit='m'\n"
        "[[axis]]\npanel='A'\nside='bottom'\nunit='l/s'\n"
        "[[curve]]\nname='a'\nlabel='2'\n[[curve]]\nname='b'\nlabel='3'\n"
    )
    both = merge(first, second)
    assert both.page.turn == 1
    assert {(a.name, len(a.marks)) for a in both.panels[0].axes} == {("left", 2), ("bottom", 0)}
    assert {(c.name, c.label) for c in both.curves} == {("a", "1"), ("b", "3")}
    assert len(both.given["axis"]) == 2
    assert len(both.given["curve"]) == 2
    assert np.shape(both.given["page"]) == (1,)
