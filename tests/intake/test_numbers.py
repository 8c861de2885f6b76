import pytest
from hypothesis import given
from hypothesis import strategies as st

from calib.errors import NotANumber
from calib.intake import Place
from calib.intake.numbers import (
    NumberText,
    decimal_sign,
    parse_concentration,
    parse_dilution,
    parse_number,
    parse_replicate,
    parse_response,
)

FINITE = st.floats(allow_nan=False, allow_infinity=False)


def texts(*numbers: str) -> list[NumberText]:
    return [NumberText(text, Place(row=row)) for row, text in enumerate(numbers, start=2)]


@given(value=FINITE, sign=st.sampled_from(".,"))
def test_a_number_written_in_full_reads_back_exactly(value, sign):
    assert parse_number(repr(value).replace(".", sign), sign) == value


@given(value=FINITE)
def test_a_response_is_the_number_and_keeps_its_text(value):
    response = parse_response(repr(value), ".")
    assert (response.value, response.absent_cause, response.text) == (value, None, repr(value))


@pytest.mark.parametrize(
    "text", ["12x4", "1 234", "1,5", "0x1F", "1_000", "१२", "--1", "1e", ".", "infinity", "5 mg"]
)
def test_text_that_is_no_number_is_refused(text):
    with pytest.raises(NotANumber, match="is no number"):
        parse_number(text, ".")


@pytest.mark.parametrize("cell", ["1e999", float("nan"), float("inf"), 10**400])
def test_a_number_that_is_not_finite_is_refused(cell):
    with pytest.raises(NotANumber, match="not finite"):
        parse_number(cell, ".")


def test_a_minus_as_printed_is_a_minus():
    assert parse_number("\N{MINUS SIGN}0.5", ".") == -0.5


@pytest.mark.parametrize(
    ("cause", "words"),
    [
        ("overflow", ["OVRFLW", "Overflow", "over", "SAT", "****", "+++"]),
        ("not detected", ["ND", "n.d.", "<LOD", "bdl"]),
        ("instrument error", ["ERR", "error", "#N/A", "NaN", "inf", "-inf"]),
        ("empty", [None]),
    ],
)
def test_words_for_no_number_become_causes_never_zero(cause, words):
    for word in words:
        response = parse_response(word, ".")
        assert (response.value, response.absent_cause) == (None, cause)


@pytest.mark.parametrize(
    ("numbers", "separator", "sign"),
    [
        (["0,5", "1,234"], ";", ","),
        (["1,234", "29,1"], "\t", ","),
        (["0.5", "1.234"], ";", "."),
        (["1.234"], ",", "."),
        (["1.234"], None, "."),
        (["1,2345"], ";", ","),
        (["0,051"], ";", ","),
        (["12", "ND", "S1.2,3x"], ";", "."),
        ([], ",", "."),
    ],
)
def test_the_numbers_of_a_file_settle_its_decimal_sign(numbers, separator, sign):
    assert decimal_sign(texts(*numbers), separator) == sign


@pytest.mark.parametrize(
    ("numbers", "separator", "words"),
    [
        (["12", "1,234"], ";", "row 3: '1,234' may be a decimal number or have a thousands sign"),
        (["1.234"], ";", "may be a decimal number"),
        (["1,234"], ",", "may be a decimal number"),
        (["0.5", "0,5"], ";", "has a comma, but '0.5' in row 2 has a point"),
        (["0,5", "1.234"], ";", "has a comma, but '1.234' in row 3 has a point"),
        (["1,234.5"], ",", "more than one sign"),
        (["1.234.567"], ";", "more than one sign"),
    ],
)
def test_a_decimal_sign_that_stays_open_is_asked_for(numbers, separator, words):
    with pytest.raises(NotANumber, match=words):
        decimal_sign(texts(*numbers), separator)


@pytest.mark.parametrize(
    ("parse", "text", "words"),
    [
        (parse_concentration, "-1", "negative"),
        (parse_concentration, "NaN", "is no number"),
        (parse_concentration, "inf", "is no number"),
        (parse_dilution, "0", "not above 0"),
        (parse_dilution, "-2", "not above 0"),
        (parse_dilution, "inf", "is no number"),
        (parse_replicate, "1.5", "no whole number"),
        (parse_replicate, "0", "no whole number"),
    ],
)
def test_numbers_out_of_their_bounds_are_refused(parse, text, words):
    with pytest.raises(NotANumber, match=words):
        parse(text, ".")


def test_empty_cells_mean_none_undiluted_and_not_numbered():
    assert parse_concentration(None, ".") is None
    assert parse_dilution(None, ".") == 1.0
    assert parse_replicate(None, ".") is None
