"""SYSTEM.toml: what is right is read, what is wrong is named with file, line and key."""

import pytest

from curvefit.duty.system_file import system_from
from curvefit.errors import InputError

PARTS = """
static_head = "12 m"

[liquid]
temperature = "15 °C"

[suction]
level = "-2 m"
altitude = "500 m"
[[suction.pipe]]
length = "6 m"
inside_diameter = "150 mm"
roughness = "0.05 mm"
[[suction.fitting]]
type = "foot_valve"
inside_diameter = "150 mm"

[discharge]
[[discharge.pipe]]
name = "rising main"
length = "400 m"
inside_diameter = "125 mm"
hazen_williams_c = 140
[[discharge.fitting]]
k = 0.9
count = 3
inside_diameter = "125 mm"

[uncertainty]
losses = "10 %"
static_head = "0.2 m"

[operation]
hours_per_year = 3000
grade = "2B"
preferred_range = ["75 %", "115 %"]
"""


def test_all_parts_are_read():
    system = system_from(PARTS)
    assert system.static_head == 12
    assert system.liquid.name == "water at 15 °C"
    assert [p.name for p in system.discharge_parts] == ["rising main", "fitting 1"]
    assert system.discharge_parts[1].count == 3
    assert system.suction.level == -2
    assert system.suction.pressure == pytest.approx(95460.84, rel=1e-4)  # ISO 2533 at 500 m
    assert (system.u_losses, system.u_static) == (pytest.approx(0.1), 0.2)
    assert system.operation.preferred == pytest.approx((0.75, 1.15))
    assert len(system.table(0.02)) == 4


@pytest.mark.parametrize(
    ("line", "k"),
    [
        ("loss_coefficient = 16126.0", 16126.0),
        ('loss_coefficient = "0.0021 m/(m3/h)2"', 0.0021 * 3600**2),
        ('loss_coefficient = "0.0021 m/(m³/h)²"', 0.0021 * 3600**2),
        ('known_point = { flow = "36 m3/h", head = "22 m" }', 10 / 0.01**2),
    ],
)
def test_one_coefficient(line, k):
    assert system_from(f'static_head = "12 m"\n{line}\n').k == pytest.approx(k)


@pytest.mark.parametrize(
    ("text", "line", "key", "what"),
    [
        ('static_head = "12 furlong"', 1, "static_head", "furlong"),
        ('static_head = "3 bar"', 1, "static_head", "is a pressure, a length is needed"),
        ("", None, "static_head", "static_head is missing"),
        ('static_head = "1 m"', None, "loss_coefficient", "nowhere"),
        ('static_head = "1 m"\nlos_coefficient = 3', 2, "los_coefficient", "not known"),
        ('static_head = "1 m"\nloss_coefficient = -3', 2, "loss_coefficient", "-3"),
        ('static_head = "1 m"\nloss_coefficient = "3 m/s"', 2, "loss_coefficient", "3 m/s"),
        (PARTS.replace('"400 m"', '"-400 m"'), 21, "discharge.pipe[1].length", "-400 m"),
        (
            PARTS.replace('inside_diameter = "150 mm"\nrough', "inside_diameter = 0\nrough"),
            None,
            "suction.pipe[1].inside_diameter",
            "inside_diameter is 0",
        ),
        (PARTS.replace("foot_valve", "trap_door"), 15, "suction.fitting[1].type", "trap_door"),
        (PARTS.replace('level = "-2 m"\n', ""), None, "suction", "level is missing"),
        (PARTS.replace('"2B"', '"9Z"'), None, "operation.grade", "9Z"),
        (PARTS.replace("k = 0.9", "k = 0.9\ntype='exit'"), None, "discharge.fitting[1]", "exactly"),
        (PARTS + 'x = "y', None, None, "not valid TOML"),
    ],
)
def test_errors_name_line_and_key(text, line, key, what):
    with pytest.raises(InputError) as caught:
        system_from(text, "plant.toml")
    error = caught.value
    assert what in error.what
    assert error.where.file == "plant.toml"
    assert error.where.key == key
    assert error.remedy
    if line is not None:
        assert error.where.line == line
