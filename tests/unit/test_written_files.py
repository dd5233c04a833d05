"""The files of a reading: valid to outside validators, complete, safe, whole or not there."""

import csv
import io
import json
import os
import warnings
from dataclasses import replace
from importlib.resources import files

import jsonschema
import numpy as np
import pytest

from curvefit.errors import InputError, WriteError
from curvefit.notes import given_entries, notes_from, read_notes
from curvefit.records import Finding, Reading
from curvefit.units import G_N, RHO_WATER
from curvefit.write import write
from curvefit.write.atomic import put_files
from curvefit.write.curves_csv import COLUMNS, neutral

ALL = {
    "c.curves.json", "c.curves.csv", "c.curves.csv-metadata.json", "c.notes.toml",
    "c.overlay.png", "c.report.html",
}  # fmt: skip


def schema():
    text = files("curvefit.write").joinpath("curves.schema.json").read_text(encoding="utf-8")
    return json.loads(text)


def document(folder):
    return json.loads((folder / "c.curves.json").read_text(encoding="utf-8"))


def rows(folder):
    text = (folder / "c.curves.csv").read_bytes().decode("utf-8")
    return list(csv.DictReader(io.StringIO(text, newline="")))


def valid(doc):
    jsonschema.Draft202012Validator(schema()).validate(doc)


def test_all_files_are_written_and_nothing_else(made_reading, tmp_path):
    paths = write(made_reading(), tmp_path / "out", "c")
    assert {p.name for p in paths} == ALL
    assert {p.name for p in (tmp_path / "out").iterdir()} == ALL
    assert {p.name for p in tmp_path.iterdir()} == {"out"}


def test_the_same_reading_gives_the_same_bytes(made_reading, tmp_path):
    for name in "ab":
        write(made_reading(), tmp_path / name, "c")
    for name in ALL:
        assert (tmp_path / "a" / name).read_bytes() == (tmp_path / "b" / name).read_bytes(), name


def test_the_document_holds_to_its_schema(made_reading, tmp_path):
    jsonschema.Draft202012Validator.check_schema(schema())
    write(made_reading(quarter_turn=True), tmp_path, "c")
    valid(document(tmp_path))


@pytest.mark.parametrize(
    "spoil",
    [
        lambda d: d.update(version=2),
        lambda d: d["curves"][0].update(unit="metres"),
        lambda d: d["curves"][0].update(flags=["torn"] * 80),
        lambda d: d["curves"][0].pop("npsh_basis", None) or d["curves"][0].update(level=None),
        lambda d: d["panels"][0]["corners_px"].pop(),
        lambda d: d["findings"][0].update(severity="bad"),
        lambda d: d["fits"][0].update(confidence=95),
    ],
)
def test_the_schema_refuses_what_is_wrong(made_reading, tmp_path, spoil):
    write(made_reading(), tmp_path, "c")
    doc = document(tmp_path)
    spoil(doc)
    with pytest.raises(jsonschema.ValidationError):
        valid(doc)


def test_pixels_are_those_of_the_stored_picture(made_reading, tmp_path):
    upright, turned = made_reading(), made_reading(quarter_turn=True)
    write(upright, tmp_path / "u", "c")
    write(turned, tmp_path / "t", "c")
    a, b = document(tmp_path / "u"), document(tmp_path / "t")
    assert (a["source"]["width_px"], b["source"]["width_px"]) == (900, 1200)
    for one, other in (
        (a["curves"][0]["trace_px"], b["curves"][0]["trace_px"]),
        (a["panels"][0]["corners_px"], b["panels"][0]["corners_px"]),
    ):
        x, y = np.array(one).T
        assert np.allclose(np.array(other), np.c_[y, 899 - x], atol=2e-3)
    box = b["findings"][0]["where"]["box_px"]
    assert box == [80.0, 779.0, 560.0, 799.0]


def test_unknown_numbers_are_null_and_nothing_is_nan(made_reading, tmp_path):
    reading = made_reading()
    bare = replace(reading.curves[0], sigma_si=None, trace_sigma_si=None, calibration_si=None,
                   correlation_si=None, flags=None, diameter_si=None)  # fmt: skip
    band = replace(reading.fits[0].band, low_si=None, high_si=None)
    fit = replace(reading.fits[0], curves=(bare,), band=band, covariance=None)
    write(replace(reading, curves=(bare,), fits=(fit,)), tmp_path, "c")
    doc = document(tmp_path)
    valid(doc)
    curve = doc["curves"][0]
    assert set(curve["standard_uncertainty"]) == {None}
    assert curve["impeller_diameter"] is None
    assert set(doc["fits"][0]["band"]["low"]) == {None}
    assert "NaN" not in json.dumps(doc)
    assert {r["low"] for r in rows(tmp_path)} == {""}


def test_units_leave_as_chosen(made_reading, tmp_path):
    reading = made_reading()
    units = {"flow": "US gpm", "head": "ft", "npsh": "ft"}
    write(reading, tmp_path, "c", units=units)
    doc = document(tmp_path)
    valid(doc)
    head, npsh = doc["curves"][0], doc["curves"][3]
    gpm = 231 * 0.0254**3 / 60
    assert (head["flow_unit"], head["unit"], npsh["unit"]) == ("[gal_us]/min", "[ft_i]", "[ft_i]")
    assert np.allclose(head["flow"], reading.curves[0].flow_si / gpm, rtol=1e-7)
    assert np.allclose(head["value"], reading.curves[0].value_si / 0.3048, rtol=1e-7)
    assert doc["curves"][2]["unit"] == "%"
    fit = doc["fits"][0]
    at = np.polynomial.polynomial.polyval(np.array(head["flow"]), fit["coefficients"])
    assert np.allclose(at, head["value"], atol=1e-6)


def test_head_as_pressure_states_its_density(made_reading, tmp_path):
    reading = made_reading()
    write(reading, tmp_path, "c", units={"head": "kPa"})
    doc = document(tmp_path)
    valid(doc)
    curve = doc["curves"][0]
    assert (curve["quantity"], curve["unit"]) == ("differential_pressure", "kPa")
    kilopascal = reading.curves[0].value_si * RHO_WATER * G_N / 1000
    assert np.allclose(curve["value"], kilopascal, rtol=1e-7)
    said = [f for f in doc["findings"] if f["code"] == "units.density"]
    assert said
    assert "998.2" in said[0]["message"]


def test_an_unknown_unit_lists_the_known(made_reading, tmp_path):
    with pytest.raises(InputError, match="US gpm"):
        write(made_reading(), tmp_path, "c", units={"flow": "buckets"})
    assert not list(tmp_path.iterdir())


def test_points_are_picked_never_made_up(made_reading, tmp_path):
    reading = made_reading()
    write(reading, tmp_path / "all", "c")
    write(reading, tmp_path / "few", "c", points=10)
    every, few = document(tmp_path / "all")["curves"][0], document(tmp_path / "few")["curves"][0]
    assert len(few["flow"]) == 10
    assert (few["flow"][0], few["flow"][-1]) == (every["flow"][0], every["flow"][-1])
    assert set(map(tuple, few["trace_px"])) <= set(map(tuple, every["trace_px"]))
    table = rows(tmp_path / "few")
    assert sum(r["source"] == "fitted" and r["curve"] == "efficiency" for r in table) == 10


def test_the_table_is_rfc_4180_and_tidy(made_reading, tmp_path):
    reading = made_reading()
    write(reading, tmp_path, "c")
    data = (tmp_path / "c.curves.csv").read_bytes()
    assert data.endswith(b"\r\n")
    assert data.count(b"\n") == data.count(b"\r\n")
    table = rows(tmp_path)
    assert list(table[0]) == [name for name, _, _ in COLUMNS]
    traced = [r for r in table if r["source"] == "traced" and r["curve"] == "head Ø210"]
    assert np.allclose([float(r["value"]) for r in traced], reading.curves[0].value_si)
    first = traced[0]
    assert (first["impeller_diameter_mm"], first["speed_rpm"], first["flags"]) == (
        "210", "2900", "bundled")  # fmt: skip
    half = 1.959964 * float(first["standard_uncertainty"])
    assert float(first["high"]) - float(first["value"]) == pytest.approx(half, rel=1e-3)
    assert first["finding_codes"] == "axis.few-marks"
    fitted = [r for r in table if r["source"] == "fitted" and r["curve"] == "head Ø210"]
    assert len(fitted) == 41
    assert {r["confidence"] for r in fitted} == {"0.95"}


def test_the_metadata_is_valid_csvw(made_reading, tmp_path):
    from csvw import CSVW

    write(made_reading(), tmp_path, "c")
    with warnings.catch_warnings():
        warnings.simplefilter("always")  # by them the validator finds its faults
        assert CSVW(str(tmp_path / "c.curves.csv-metadata.json"), validate=True).is_valid
        path = tmp_path / "c.curves.csv"
        path.write_text(path.read_text(encoding="utf-8").replace(",2900,", ",fast,", 1), "utf-8")
        assert not CSVW(str(tmp_path / "c.curves.csv-metadata.json"), validate=True).is_valid


@pytest.mark.parametrize("text", ["=1+1", "+5", "-5", "@SUM(A1)", "\tx", " =1"])
def test_no_text_is_a_formula(text, made_reading, tmp_path):
    assert neutral(text) == "'" + text
    reading = made_reading()
    curve = replace(reading.curves[0], name=text)
    write(replace(reading, curves=(curve,), fits=()), tmp_path, "c")
    assert {r["curve"] for r in rows(tmp_path)} == {"'" + text}
    assert neutral("head Ø210") == "head Ø210"


def test_a_reading_without_panels_gives_its_findings_alone(made_reading, tmp_path):
    finding = Finding("error", "chart.none", "No plot box was found.")
    paths = write(Reading(made_reading().page, findings=(finding,)), tmp_path, "c")
    assert [p.name for p in paths] == ["c.curves.json"]
    valid(document(tmp_path))
    assert document(tmp_path)["findings"][0]["code"] == "chart.none"


GIVEN = """
[[axis]]
panel = "A"
side = "left"
marks = [[120, 560, 0], [120, 80, 60]]

[[curve]]
name = "head Ø210"
label = 'wörn "thin"'
"""


def test_given_notes_are_kept_and_stay_given(made_reading, tmp_path):
    page = made_reading().page
    notes = notes_from(GIVEN, page)
    write(made_reading(notes=notes), tmp_path, "c")
    again = read_notes(tmp_path / "c.notes.toml", page)
    assert again.given == notes.given
    assert [c.label for c in again.curves] == ['wörn "thin"']
    write(made_reading(notes=again), tmp_path, "c")
    assert read_notes(tmp_path / "c.notes.toml", page).given == notes.given


def test_given_notes_that_stand_there_are_kept_unread(made_reading, tmp_path):
    (tmp_path / "c.notes.toml").write_text(GIVEN, encoding="utf-8")
    write(made_reading(), tmp_path, "c")
    kept = given_entries((tmp_path / "c.notes.toml").read_text(encoding="utf-8"))
    assert [e["label"] for e in kept["curve"]] == ['wörn "thin"']
    assert len(kept["axis"]) == 1


def test_what_is_replaced_is_kept_as_a_comment(made_reading, tmp_path):
    (tmp_path / "c.notes.toml").write_text(GIVEN, encoding="utf-8")
    notes = notes_from('[[curve]]\nname = "head Ø210"\nlabel = "new"\n')
    write(made_reading(notes=notes), tmp_path, "c")
    text = (tmp_path / "c.notes.toml").read_text(encoding="utf-8")
    assert [e["label"] for e in given_entries(text)["curve"]] == ["new"]
    assert '# label = "wörn \\"thin\\""' in text


def test_notes_that_cannot_be_understood_are_not_overwritten(made_reading, tmp_path):
    path = tmp_path / "c.notes.toml"
    path.write_text("[[curve]\n", encoding="utf-8")
    with pytest.raises(InputError, match="TOML"):
        write(made_reading(), tmp_path, "c")
    assert path.read_text(encoding="utf-8") == "[[curve]\n"
    assert [p.name for p in tmp_path.iterdir()] == ["c.notes.toml"]


def test_what_was_read_can_be_made_given(made_reading, tmp_path):
    """With the lines `by` removed, the file says of axes and curves what was read."""
    reading = made_reading(quarter_turn=True)
    write(reading, tmp_path, "c")
    text = (tmp_path / "c.notes.toml").read_text(encoding="utf-8").replace('by = "read"\n', "")
    notes = notes_from(text, reading.page)
    assert [p.name for p in notes.panels] == ["A", "B"]
    assert np.allclose(notes.panels[0].corners, reading.panels[0].corners, atol=0.01)
    (bottom, left, right) = notes.panels[0].axes
    assert (bottom.unit, left.quantity, right.unit) == ("m3/h", "head", "%")
    assert np.allclose(
        [m.xy for m in left.marks], [m.xy for m in reading.panels[0].axis("left").marks], atol=0.01
    )
    assert [m.value for m in left.marks] == [0, 15, 30, 45, 60]
    assert [c.diameter_si for c in notes.curves] == [0.21, 0.195, None, None]
    path = np.array(notes.curves[0].path)
    trace = reading.curves[0].trace.xy
    on_path = np.interp(trace[:, 0], path[:, 0], path[:, 1])
    assert np.abs(on_path - trace[:, 1]).max() < 0.15


class Broken(Exception):
    pass


def test_a_failure_leaves_every_file_as_it_was(tmp_path, monkeypatch):
    (tmp_path / "b").write_bytes(b"old")
    real = os.fsync
    calls = []

    def full(handle):
        calls.append(handle)
        if len(calls) == 3:
            raise OSError(28, "No space left on device")
        real(handle)

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(WriteError, match="No space left") as caught:
        put_files(tmp_path, {"a": b"1", "b": b"2", "c": b"3"})
    assert "disk is full" in caught.value.remedy
    assert {p.name: p.read_bytes() for p in tmp_path.iterdir()} == {"b": b"old"}


def test_a_crash_while_writing_leaves_no_part(tmp_path, monkeypatch):
    def crash(handle):
        raise Broken

    monkeypatch.setattr(os, "fsync", crash)
    with pytest.raises(Broken):
        put_files(tmp_path, {"a": b"1"})
    assert list(tmp_path.iterdir()) == []


def test_an_input_is_never_overwritten(made_reading, tmp_path):
    chart = tmp_path / "c.overlay.png"
    chart.write_bytes(b"the chart")
    (tmp_path / "link").symlink_to(tmp_path)
    for folder in (tmp_path, tmp_path / "link"):
        with pytest.raises(WriteError, match="overwrite an input"):
            write(made_reading(), folder, "c", inputs=[chart])
    assert chart.read_bytes() == b"the chart"


@pytest.mark.parametrize("place", ["file", "file/below", "/proc/nowhere"])
def test_a_folder_that_cannot_be_written(place, made_reading, tmp_path):
    (tmp_path / "file").write_text("keep")
    with pytest.raises(WriteError) as caught:
        write(made_reading(), tmp_path / place, "c")
    assert caught.value.exit_code == 6
    assert "--out" in caught.value.remedy
    assert (tmp_path / "file").read_text() == "keep"


def test_odd_names_stay_in_the_folder(made_reading, tmp_path):
    paths = write(made_reading(), tmp_path / "übér dir", "a b.. ü c")
    assert {p.parent for p in paths} == {tmp_path / "übér dir"}
    from csvw import CSVW

    with warnings.catch_warnings():
        warnings.simplefilter("always")
        meta = next(p for p in paths if p.name.endswith("metadata.json"))
        assert CSVW(str(meta), validate=True).is_valid
