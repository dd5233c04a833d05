"""Unit factors against exact definitions and an independent library.

Sources: NIST SP 811 (2008), Appendix B.8 and the exact definitions of inch, pound, gallon and
standard gravity; pint as an independent library; ucumvert as a parser of UCUM codes.
"""

from fractions import Fraction

import pytest

from curvefit.errors import InputError
from curvefit.units import UNITS, from_si, parse, parse_quantity, to_si, unit

INCH, FOOT, POUND, G = (
    Fraction("0.0254"),
    Fraction("0.3048"),
    Fraction("0.45359237"),
    Fraction("9.80665"),
)
GALLON, IMPERIAL = 231 * INCH**3, Fraction("0.00454609")

EXACT = {
    "m3/h": Fraction(1, 3600),
    "L/s": Fraction(1, 1000),
    "L/min": Fraction(1, 60000),
    "[gal_us]/min": GALLON / 60,
    "[gal_br]/min": IMPERIAL / 60,
    "10*6.[gal_us]/d": 10**6 * GALLON / 86400,
    "[ft_i]3/s": FOOT**3,
    "[ft_i]": FOOT,
    "[in_i]": INCH,
    "[psi]": POUND * G / INCH**2,
    "bar": Fraction(10**5),
    "kgf/cm2": Fraction("98066.5"),
    "[HP]": 550 * FOOT * POUND * G,
    "kW": Fraction(1000),
    "/min": Fraction(1, 60),
    "%": Fraction(1, 100),
}


@pytest.mark.parametrize("code", EXACT)
def test_factor_is_the_exact_definition(code):
    assert unit(code).factor == pytest.approx(float(EXACT[code]), rel=1e-14)


@pytest.mark.parametrize(
    ("code", "printed", "value"),
    [  # as printed in NIST SP 811 B.8, seven digits
        ("[gal_us]/min", "gallon (US) per minute", 6.309020e-05),
        ("[gal_br]/min", "gallon (Canadian and UK) per minute", 7.57682e-05),
        ("[ft_i]3/s", "cubic foot per second", 2.831685e-02),
        ("[HP]", "horsepower (550 ft lbf/s)", 7.456999e02),
        ("[psi]", "psi", 6.894757e03),
    ],
)
def test_factor_as_printed_by_nist(code, printed, value):
    assert unit(code).factor == pytest.approx(value, rel=6e-7), printed


def test_metric_horsepower():
    assert parse("PS").factor == pytest.approx(735.49875, rel=1e-14)  # 75 kgf m/s, exact


@pytest.mark.parametrize(
    ("code", "name"),
    [
        ("m3/h", "meter**3/hour"),
        ("[gal_us]/min", "gallon/minute"),
        ("[gal_br]/min", "imperial_gallon/minute"),
        ("[ft_i]", "foot"),
        ("[psi]", "psi"),
        ("bar", "bar"),
        ("[HP]", "horsepower"),
        ("kgf/cm2", "kilogram_force/centimeter**2"),
        ("mm2/s", "centistokes"),
        ("Hz", "1/second"),
    ],
)
def test_factor_against_pint(code, name):
    pint = pytest.importorskip("pint")
    quantity = pint.UnitRegistry().Quantity(1.0, name).to_base_units()
    assert unit(code).factor == pytest.approx(quantity.magnitude, rel=1e-12)


def test_codes_are_ucum():
    ucumvert = pytest.importorskip("ucumvert")
    parser = ucumvert.get_ucum_parser()
    for u in UNITS:
        parser.parse(u.code)


def test_every_spelling_is_found_and_round_trips():
    for u in UNITS:
        for spelling in u.spellings:
            assert parse(spelling).dimension == u.dimension, spelling
        assert from_si(to_si(3.25, u), u) == pytest.approx(3.25, rel=1e-12)


def test_unknown_unit_lists_the_known():
    with pytest.raises(InputError, match="furlong") as caught:
        parse("furlong", "length")
    assert "ft" in caught.value.remedy
    assert "kPa" not in caught.value.remedy


def test_wrong_dimension_is_refused():
    with pytest.raises(InputError, match="is a length, a pressure is needed"):
        parse("m", "pressure")


@pytest.mark.parametrize(
    ("text", "dimension", "si"),
    [("12 m", "length", 12), ("20 °C", "temperature", 293.15), ("1,5 m", "length", None)],
)
def test_quantities(text, dimension, si):
    if si is None:
        with pytest.raises(InputError):
            parse_quantity(text, dimension)
    else:
        assert parse_quantity(text, dimension) == pytest.approx(si)
