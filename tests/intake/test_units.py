import pytest
from hypothesis import given
from hypothesis import strategies as st

from calib.errors import UnknownUnit
from calib.intake import CONCENTRATION_UNITS, conversion_factor, parse_concentration_unit

UNITS = st.sampled_from(CONCENTRATION_UNITS)


@pytest.mark.parametrize("unit", CONCENTRATION_UNITS)
def test_each_unit_is_its_own_spelling(unit):
    assert parse_concentration_unit(unit) == unit


@pytest.mark.parametrize("text", ["µg/L", "μg/L", "ug/l", "mcg/L", " ug / L ", "µg/l"])
def test_spellings_of_microgram_per_litre_are_one_unit(text):
    assert parse_concentration_unit(text) == "ug/L"


@pytest.mark.parametrize("text", ["", "ppm", "MG/L", "mM", "mg", "mg/dL", "nA"])
def test_other_units_are_refused_with_the_list_of_known_ones(text):
    with pytest.raises(UnknownUnit, match="use one of pg/L, ng/L, ug/L"):
        parse_concentration_unit(text)


@pytest.mark.parametrize(
    ("source", "target", "factor"),
    # Decimal prefixes: The International System of Units (SI Brochure), 9th edition, section 3 (from memory).
    [
        ("mg/L", "ug/L", 1e3),
        ("ng/mL", "ug/L", 1.0),
        ("pg/mL", "g/L", 1e-9),
        ("mol/L", "nmol/L", 1e9),
        ("%", "1", 0.01),
    ],
)
def test_factors_follow_the_decimal_prefixes(source, target, factor):
    assert conversion_factor(source, target) == factor


@given(source=UNITS, target=UNITS)
def test_there_and_back_is_one_within_a_kind(source, target):
    try:
        there = conversion_factor(source, target)
    except UnknownUnit:
        return
    assert there * conversion_factor(target, source) == pytest.approx(1.0, rel=1e-15)


def test_mass_and_amount_are_not_converted_without_a_molar_mass():
    with pytest.raises(UnknownUnit, match=r"mg/L \(mass per volume\) cannot be converted to mmol/L"):
        conversion_factor("mg/L", "mmol/L")
