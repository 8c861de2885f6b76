"""The public Python interface: the verbs of the command line over one store."""

import pytest
from small_laboratory import METHOD, a_day, header_block, unknown

import calib
from calib.bench.amend_run import Change
from calib.bench.register import LotRecord, add_event, add_instrument, add_lot, add_method, list_lots
from calib.errors import CalibError, InputError, MethodError, NotAStore, StoreError, UnreadableFile


def test_a_store_opened_by_its_path_does_the_day(laboratory_path, tmp_path):
    day = tmp_path / "day.csv"
    day.write_text(header_block(a_day()))
    later = tmp_path / "later.csv"
    later.write_text(header_block([unknown("U1", 3.0)], started="2026-04-01T15:00:00+02:00"))
    with calib.open_store(laboratory_path, by="KM") as laboratory:
        assert isinstance(laboratory, calib.Laboratory)
        (record,) = laboratory.log(day)
        assert record.heading.by == "KM"
        assert laboratory.quantify(later)[0].curve_run == 1
        assert [line.id for line in laboratory.runs(instrument="LX-1", last=1)] == [2]
        assert laboratory.exclude(1, ["#3"], reason="drop").evaluation.verdict.accepted
        assert laboratory.restore(1, ["#3"], reason="other cup").evaluation.verdict.accepted
        assert laboratory.refit(1, reason="to be sure").curves_before == 3
        assert laboratory.amend(1, Change(operator="RS"), reason="x").heading.operator == "RS"
        assert laboratory.void(2, reason="x").heading.void_reason == "x"
        assert len(laboratory.drift("LX-1").runs) == 1
        assert laboratory.check().sound
    with calib.open_store(f"sqlite:///{laboratory_path}") as again:
        assert len(again.runs()) == 2
        assert again.by


def test_a_file_that_is_no_store_is_refused(tmp_path):
    (tmp_path / "x.db").write_text("hello")
    with pytest.raises(NotAStore):
        calib.open_store(tmp_path / "x.db")


def test_runs_are_listed_by_instrument_and_method(bench):
    bench.log(a_day())
    assert bench.laboratory.runs(instrument="LX-2") == ()
    assert len(bench.laboratory.runs(method="line-a")) == 1
    with pytest.raises(CalibError, match="unknown instrument 'LX-9'"):
        bench.laboratory.runs(instrument="LX-9")
    with pytest.raises(CalibError, match="unknown method 'line-z'"):
        bench.laboratory.runs(method="line-z")


# The register.

INSTRUMENT = {
    "kind": "x",
    "serial": "",
    "location": "",
    "response_ceiling": None,
    "utc_offset_minutes": 0,
    "by": "KM",
}
LOT = LotRecord("L", "water", 1.0, "mg/L", 0.1, 2.0, None, None, None, None)


@pytest.mark.parametrize(
    ("name", "changed", "words"),
    [
        ("LX-1", {}, "instrument 'LX-1' is registered already"),
        (" ", {}, "the name of the instrument is empty"),
        ("N", {"utc_offset_minutes": 900}, "a clock offset of 900 minutes from UTC is not possible"),
        ("N", {"response_ceiling": float("nan")}, "a response ceiling of nan is not possible"),
    ],
)
def test_an_instrument_that_cannot_be_is_refused(bench, name, changed, words):
    with pytest.raises(CalibError, match=words):
        add_instrument(bench.store, name, **(INSTRUMENT | changed))


@pytest.mark.parametrize(
    ("changed", "words"),
    [
        ({"name": "A-1"}, "standard lot 'A-1' is registered already"),
        ({"name": ""}, "the name of the lot is empty"),
        ({"unit": None}, "a certified value needs its unit"),
        ({"unit": "cups"}, "'cups' is no known unit"),
        ({"coverage_factor": None}, "needs its coverage factor k"),
        ({"certified_value": -1.0}, "must be above 0"),
        ({"expanded_uncertainty": float("nan")}, "must be above 0"),
        ({"certified_value": float("inf")}, "certified_value is inf"),
    ],
)
def test_a_lot_that_cannot_be_is_refused(bench, changed, words):
    facts = {name: getattr(LOT, name) for name in LotRecord.__slots__} | changed
    with pytest.raises(CalibError, match=words):
        add_lot(bench.store, LotRecord(**facts), by="KM")
    assert [lot.name for lot in list_lots(bench.store)] == ["A-1"]


def test_an_event_that_says_nothing_is_refused(bench):
    at = bench.store.now()
    with pytest.raises(InputError, match="unknown kind of event 'party'; known are"):
        add_event(bench.store, "LX-1", at=at, kind="party", what="x", by="KM")
    with pytest.raises(InputError, match="say in words what happened"):
        add_event(bench.store, "LX-1", at=at, kind="part", what=" ", by="KM")


def test_methods_are_versioned_and_never_added_twice(bench):
    text = METHOD.format(name="line-a", analyte="alpha")
    with pytest.raises(MethodError, match="version 1 has this very text; nothing to add"):
        add_method(bench.store, bench.file("m.toml", text), by="KM")
    wider = text.replace("residual_sd = 0.2", "residual_sd = 0.3")
    assert add_method(bench.store, bench.file("m.toml", wider), by="KM").version == 2
    assert bench.log(a_day()).heading.method_version == 2


def test_an_old_run_keeps_the_version_it_was_judged_by(bench):
    bench.log(a_day())
    stricter = METHOD.format(name="line-a", analyte="alpha").replace(
        "residual_sd = 0.2", "residual_sd = 0.001"
    )
    add_method(bench.store, bench.file("m.toml", stricter), by="KM")
    assert bench.laboratory.refit(1, reason="to be sure").evaluation.verdict.accepted
    assert bench.laboratory.run(1).heading.method_version == 1


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b"\xff\xfe\x00", "not UTF-8 text; give the TOML file of a method"),
        (b" " * 1_000_001, "too large for a method definition"),
        (None, r"cannot be read \(No such file or directory\); check the path"),
    ],
)
def test_a_method_file_that_cannot_be_read_is_refused(bench, content, words):
    path = bench.folder / "m.toml"
    if content is not None:
        path.write_bytes(content)
    else:
        path = bench.folder / "none.toml"
    with pytest.raises(UnreadableFile, match=words):
        add_method(bench.store, path, by="KM")


def test_a_deed_without_a_name_is_refused(bench):
    with pytest.raises(StoreError, match="needs 'by' in words"):
        add_instrument(bench.store, "N", **(INSTRUMENT | {"by": " "}))
