"""The duty command: its files, its choices, its messages and exit codes."""

import json
from importlib.resources import files

import jsonschema
import pytest
from curvefit_cli.main import app
from curvefit_cli.show import ended

from curvefit.write import write

PLANT = """
static_head = "18 m"
known_point = { flow = "60 m3/h", head = "40 m" }
[uncertainty]
losses = "5 %"
"""


@pytest.fixture(scope="module")
def curves(made_reading, tmp_path_factory):
    folder = tmp_path_factory.mktemp("duty")
    paths = write(made_reading(), folder, "pump")
    return next(p for p in paths if p.name.endswith(".curves.json"))


def run(*arguments):
    return ended(lambda: app(args=[str(a) for a in arguments], standalone_mode=False), debug=False)


@pytest.fixture
def plant(tmp_path):
    def made(text=PLANT):
        path = tmp_path / "plant.toml"
        path.write_text(text, encoding="utf-8")
        return path

    return made


def test_the_document_holds_the_duty_and_obeys_its_schema(curves, plant, tmp_path, capsys):
    code = run("duty", curves, plant(), "--diameter", "210 mm", "--out", tmp_path)
    assert code == 0
    document = json.loads((tmp_path / "pump.duty.json").read_text(encoding="utf-8"))
    schema = json.loads(files("curvefit.write").joinpath("duty.schema.json").read_text())
    jsonschema.Draft202012Validator.check_schema(schema)
    jsonschema.validate(document, schema)
    (point,) = document["points"]
    # the head drawn is 50 − 0.002 Q² − 1e-5 Q³, the system 18 + 22 (Q/60)²
    q = point["flow"]["value"]
    assert 50 - 0.002 * q**2 - 1e-5 * q**3 == pytest.approx(18 + 22 * (q / 60) ** 2, abs=0.02)
    assert point["flow"]["low"] < q < point["flow"]["high"]
    assert point["stable"] is True
    assert point["efficiency"]["value"] == pytest.approx(2.4 * q - 0.0185 * q**2, abs=0.2)
    assert "duty" in capsys.readouterr().out
    assert (tmp_path / "pump.duty.svg").read_text(encoding="utf-8").startswith("<svg")


def test_units_on_the_way_out(curves, plant, tmp_path):
    options = ("--flow-unit", "l/s", "--head-unit", "ft", "--quiet")
    run("duty", curves, plant(), "--diameter", "210 mm", "--out", tmp_path, *options)
    (point,) = json.loads((tmp_path / "pump.duty.json").read_text())["points"]
    assert point["flow"]["unit"] == "L/s"
    assert point["head"]["unit"] == "[ft_i]"
    q = point["flow"]["value"] * 3.6
    assert point["head"]["value"] * 0.3048 == pytest.approx(18 + 22 * (q / 60) ** 2, rel=1e-3)


def test_a_diameter_between_those_drawn(curves, plant, tmp_path):
    assert run("duty", curves, plant(), "--diameter", "203 mm", "--out", tmp_path) == 0
    document = json.loads((tmp_path / "pump.duty.json").read_text())
    assert document["pump"]["impeller_diameter"] == {"value": 203.0, "unit": "mm"}
    between = document["points"][0]["flow"]["value"]
    ends = []
    for diameter in ("195 mm", "210 mm"):
        run("duty", curves, plant(), "--diameter", diameter, "--out", tmp_path, "--quiet")
        found = json.loads((tmp_path / "pump.duty.json").read_text())
        ends.append(found["points"][0]["flow"]["value"])
    assert ends[0] < between < ends[1]


def test_a_wanted_flow_sets_the_speed(curves, plant, tmp_path):
    options = ("--diameter", "210 mm", "--want-flow", "50 m3/h", "--out", tmp_path)
    assert run("duty", curves, plant(), *options) == 0
    document = json.loads((tmp_path / "pump.duty.json").read_text())
    assert document["points"][0]["flow"]["value"] == pytest.approx(50, abs=1e-3)
    assert document["pump"]["speed"]["value"] < 2900


def test_two_in_parallel_pump_more(curves, plant, tmp_path):
    flows = []
    for n in (1, 2):
        options = ("--diameter", "210 mm", "--parallel", n, "--out", tmp_path, "--quiet")
        run("duty", curves, plant(), *options)
        flows.append(json.loads((tmp_path / "pump.duty.json").read_text())["points"][0]["flow"])
    assert flows[0]["value"] < flows[1]["value"] < 2 * flows[0]["value"]


def test_the_same_input_gives_the_same_bytes(curves, plant, tmp_path):
    written = []
    for name in ("a", "b"):
        run("duty", curves, plant(), "--diameter", "195 mm", "--out", tmp_path / name, "--quiet")
        written.append((tmp_path / name / "pump.duty.json").read_bytes())
    assert written[0] == written[1]


@pytest.mark.parametrize(
    ("text", "options", "code", "words"),
    [
        (PLANT, (), 2, ["2 head curves", "210 mm"]),
        (PLANT, ("--diameter", "21 parsec"), 2, ["parsec", "mm"]),
        (PLANT, ("--pump", "nine"), 2, ["no curve fits", "Choose from"]),
        (PLANT.replace("18 m", "-"), ("--diameter", "210 mm"), 2, ["static_head", "line 2"]),
        (PLANT.replace("18 m", "300 m").replace("40 m", "310 m"), ("--diameter", "210 mm"), 4, []),
        ("static_head = 1", ("--diameter", "210 mm"), 2, ["loss_coefficient"]),
        (PLANT, ("--diameter", "210 mm", "--want-flow", "900 m3/h"), 2, ["no speed ratio"]),
    ],
)
def test_bad_input_ends_with_a_clear_message(
    curves, plant, tmp_path, capsys, text, options, code, words
):
    assert run("duty", curves, plant(text), "--out", tmp_path / "out", *options) == code
    said = capsys.readouterr()
    for word in words:
        assert word in said.err
    assert "Traceback" not in said.err
    if code == 4:
        assert "duty.no-crossing" in said.out
        assert json.loads((tmp_path / "out" / "pump.duty.json").read_text())["points"] == []


def test_a_missing_file_is_exit_3(curves, tmp_path, capsys):
    assert run("duty", curves, tmp_path / "none.toml") == 3
    assert run("duty", tmp_path / "none.curves.json", tmp_path / "none.toml") == 3
    assert "none.toml" in capsys.readouterr().err


def test_a_wanted_flow_sets_the_diameter(curves, plant, tmp_path):
    options = ("--want-flow", "56 m3/h", "--by", "diameter", "--out", tmp_path)
    assert run("duty", curves, plant(), *options) == 0
    document = json.loads((tmp_path / "pump.duty.json").read_text())
    assert document["points"][0]["flow"]["value"] == pytest.approx(56, abs=0.01)
    assert 195 < document["pump"]["impeller_diameter"]["value"] < 210


def test_points_and_equation_agree_within_their_intervals(curves, plant, tmp_path):
    found = {}
    for on in ("equation", "points"):
        options = ("--diameter", "195 mm", "--on", on, "--out", tmp_path, "--quiet")
        assert run("duty", curves, plant(), *options) == 0
        found[on] = json.loads((tmp_path / "pump.duty.json").read_text())["points"][0]["flow"]
    assert found["points"]["low"] <= found["equation"]["value"] <= found["points"]["high"]


def test_the_page_holds_duty_losses_and_cautions_and_escapes(curves, plant, tmp_path):
    hostile = plant(PLANT + '\n[liquid]\nname = "<b>brine"\ndensity = "1100 kg/m3"\n')
    run("duty", curves, hostile, "--diameter", "210 mm", "--out", tmp_path, "--quiet")
    page = (tmp_path / "pump.duty.html").read_text(encoding="utf-8")
    assert "default-src 'none'" in page
    assert "&lt;b&gt;brine" in page
    assert "<b>brine" not in page
    for word in ("95 % interval", "k as stated", "witnessed test", "<svg"):
        assert word in page
    assert "http://" not in page.replace("http://www.w3.org/2000/svg", "")


def test_an_npsh_margin_that_the_chart_cannot_answer_is_refused(curves, plant, tmp_path, capsys):
    asking = plant(PLANT + '[operation]\nnpsh_margin = "1 m"\n')
    code = run("duty", curves, asking, "--diameter", "210 mm", "--on", "points", "--out", tmp_path)
    assert code == 0  # this chart has an NPSHr curve
    document = json.loads(curves.read_text(encoding="utf-8"))
    document["fits"] = [f for f in document["fits"] if "NPSHr" not in f["curves"]]
    bare = tmp_path / "bare.curves.json"
    bare.write_text(json.dumps(document), encoding="utf-8")
    assert run("duty", bare, asking, "--diameter", "210 mm", "--out", tmp_path) == 2
    said = capsys.readouterr().err
    for word in ("plant.toml", "line 7", "operation.npsh_margin", "no NPSHr"):
        assert word in said


def test_a_duty_outside_the_allowable_range_is_an_error(curves, plant, tmp_path, capsys):
    narrow = plant(PLANT + '[operation]\nallowable_range = ["10 %", "30 %"]\n')
    run("duty", curves, narrow, "--diameter", "195 mm", "--out", tmp_path)
    document = json.loads((tmp_path / "pump.duty.json").read_text(encoding="utf-8"))
    found = {f["code"]: f["severity"] for f in document["findings"]}
    share = document["points"][0]["share_of_bep_flow"]
    assert share is None or found["duty.outside-allowable-range"] == "error"
    assert share is not None
