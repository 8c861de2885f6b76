"""Whatever comes in, it is read or refused with one line; nothing else happens."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from calib.errors import InputError
from calib.intake import LAYOUTS, read_bytes, read_text

from .written import ELECTRODE, LONG, PLATE, PROBE, growth_reader, saved

TEXTS = st.sampled_from([PLATE, PROBE, ELECTRODE, LONG])
NAMES = st.sampled_from([None, *(layout.name for layout in LAYOUTS)])
PIECES = st.sampled_from(
    [*',;\t\n"#[]().-+*x0919 ', "\r\n", "1e999", "NaN", "plan,1", "µ", "std ", "standard"]
) | st.text(max_size=4)
CHANGES = st.lists(st.tuples(st.floats(0, 1), st.integers(0, 6), PIECES), min_size=1, max_size=6)
WORKBOOK = saved(growth_reader())


def is_read_or_refused(content: bytes, layout: str | None) -> None:
    try:
        parsed = read_bytes("run", content, layout)
    except InputError as error:
        parsed, told = None, str(error)
    if parsed is None:
        assert told.startswith("run: ")
        assert "\n" not in told
        return
    for run in parsed.runs:
        assert run.readings
        assert run.response_unit
        assert all((reading.response is None) == bool(reading.absent_cause) for reading in run.readings)


@given(text=TEXTS, changes=CHANGES, name=NAMES)
def test_a_damaged_text(text, changes, name):
    for where, removed, piece in changes:
        at = int(where * len(text))
        text = text[:at] + piece + text[at + removed :]
    is_read_or_refused(text.encode(), name)


@pytest.mark.parametrize("content", [b",", b";;\n;", b"\t\n\t\n"])
@pytest.mark.parametrize("layout", [None, *(layout.name for layout in LAYOUTS)])
def test_separators_alone_are_refused(content, layout):
    is_read_or_refused(content, layout)


@given(content=st.binary(max_size=300), name=NAMES)
def test_any_bytes(content, name):
    is_read_or_refused(content, name)


@settings(max_examples=60, deadline=None)
@given(where=st.floats(0, 1), replacement=st.binary(max_size=8))
def test_a_damaged_workbook(where, replacement):
    at = int(where * len(WORKBOOK))
    is_read_or_refused(WORKBOOK[:at] + replacement + WORKBOOK[at + len(replacement) :], None)


@pytest.mark.parametrize(
    "text",
    [
        "sample,role," + " " * 100_000 + "x\n1,2,3",
        "sample,role," + "[" * 100_000 + "\n1,2,3",
        "# key" + " " * 100_000 + ": value\nn,label,kind\n",
        "plan,1\nA,unk " + "x " * 50_000 + "\n\nreadings,1\nA,1\n",
        "sample,role,concentration [ug/L],response [1]\nS,standard,1," + "9" * 100_000,
    ],
)
def test_a_cell_of_great_length_is_refused_like_any_other(text):
    with pytest.raises(InputError):
        read_text(text)
