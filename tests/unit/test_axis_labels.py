"""Readings of printed numbers."""

from __future__ import annotations

import pytest

from curvefit.calibrate.labels import parts, readings, row_readings


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("20", 20), ("0,5", 0.5), ("0.25", 0.25), (".5", 0.5), ("−10", -10), ("–10", -10),
        ("1,000", 1000), ("1 000", 1000), ("1'000", 1000), ("1.000.000", 1e6), ("1.000,5", 1000.5),
        ("2·10³", 2000), ("10^-1", 0.1), ("5e3", 5000), ("50 %", 50), ("lO", 10), ("2S", 25),
        ("-", 0), ("70-", 70), ("05", 0.5), ("10⁰", 1),
    ],
)  # fmt: skip
def test_first_reading(text, value):
    assert readings(text)[0].value == pytest.approx(value)


@pytest.mark.parametrize(
    ("text", "value"),
    [("25", 2.5), ("5", 0.5), ("-70", 70), ("1,000", 1.0), ("1.250", 1.25), ("103", 1000)],
)
def test_other_readings_cost_more(text, value):
    found = readings(text)
    other = next(r for r in found if r.value == pytest.approx(value))
    assert other.cost > found[0].cost


@pytest.mark.parametrize("text", ["Q [m]", "Head", "η", "Ø210", "", "80-200-315/4 pole"])
def test_words_are_no_numbers(text):
    assert readings(text) == ()


def test_merged_numbers_are_parted():
    assert [p.text for p in parts("0 20 40")] == ["0", "20", "40"]
    assert len(parts("1 000")) == 1
    assert len(parts("Total head")) == 1


def test_a_leading_zero_proves_lost_points_for_the_whole_row():
    row = row_readings(["00", "05", "10", "15"])
    assert [min(r, key=lambda x: x.cost).value for r in row[1:2]] == [0.5]
    lost = next(r for r in row[2] if r.value == 1.0)
    plain = next(r for r in row[2] if r.value == 10.0)
    assert lost.cost < plain.cost
