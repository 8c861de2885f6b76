"""The JSON of every command that has it: documented keys, numbers that are numbers, never NaN."""

import json

import pytest
from small_laboratory import a_day, header_block, long_form, unknown, with_response

RUN = {"id", "instrument", "method", "method_version", "at", "by", "file", "fingerprint"}
CURVE = {
    "id",
    "model",
    "noise",
    "parameters",
    "residual_sd",
    "degrees_of_freedom",
    "converged",
    "findings",
}
STANDARD = {
    "label",
    "role",
    "concentration",
    "response",
    "back_calculated",
    "relative_error",
    "excluded",
    "reason",
}
CRITERION = {"id", "what", "limit", "observed", "passed", "source"}
QUANTITY = {
    "sample",
    "concentration",
    "u",
    "k",
    "U",
    "lower",
    "upper",
    "confidence",
    "kind",
    "degrees_of_freedom",
    "replicates",
    "mean_response",
    "state",
    "position",
    "flags",
    "dilution",
    "unit",
    "curve_id",
    "budget",
}


def check_entry(entry):
    """One run as documented."""
    assert entry.keys() >= {"run", "curve", "standards", "verdict", "quantities"}
    assert entry["run"].keys() >= RUN
    assert entry["curve"].keys() >= CURVE
    for parameter in entry["curve"]["parameters"].values():
        assert parameter.keys() == {"value", "u"}
    for finding in entry["curve"]["findings"]:
        assert finding.keys() == {"code", "message"}
    for standard in entry["standards"]:
        assert standard.keys() >= STANDARD
    assert entry["verdict"].keys() >= {"decision", "criteria", "calibrated_range"}
    assert entry["verdict"]["decision"] in ("accepted", "accepted with exclusions", "rejected")
    assert entry["verdict"]["calibrated_range"].keys() == {"lowest", "highest", "unit"}
    for criterion in entry["verdict"]["criteria"]:
        assert criterion.keys() >= CRITERION
        assert isinstance(criterion["passed"], bool)
    assert entry["quantities"]
    for quantity in entry["quantities"]:
        assert quantity.keys() >= QUANTITY
        assert quantity["kind"] in ("curve only", "combined")


def test_a_logged_file_has_the_documented_keys(desk, day):
    told = desk("log", day, "--json").json
    assert (told["schema"], told["file"], len(told["runs"])) == ("calib-log-1", "day.csv", 1)
    (entry,) = told["runs"]
    check_entry(entry)
    assert entry["run"]["at"] == "2026-04-01T08:00:00+02:00"
    assert [s["role"] for s in entry["standards"]] == ["standard"] * 12
    assert [c["sample"] for c in entry["checks"]] == ["Q"]
    assert [q["sample"] for q in entry["quantities"]] == ["U1", "U2"]
    assert all(q["U"] == pytest.approx(q["k"] * q["u"]) for q in entry["quantities"])
    assert all(q["curve_id"] == entry["curve"]["id"] for q in entry["quantities"])


def test_json_has_the_full_precision_of_the_store(desk, day):
    logged = desk("log", day, "--json").json["runs"][0]
    assert desk("run", "show", 1, "--json").json == logged
    target = desk.folder / "run.json"
    desk("report", 1, "--to", target)
    assert json.loads(target.read_text(encoding="utf-8")) == logged


def test_a_rejected_run_reads_null_where_nothing_is_known(desk):
    outcome = desk("log", desk.file("d.csv", header_block(with_response(a_day(), 3, 40.0))), "--json")
    assert outcome.code == 3
    (entry,) = outcome.json["runs"]
    check_entry(entry)
    assert entry["verdict"]["decision"] == "rejected"
    assert [(q["concentration"], q["u"], q["U"], q["upper"]) for q in entry["quantities"]] == [
        (None,) * 4
    ] * 2


@pytest.mark.parametrize("model", ["line", "4PL", "saturation", "quenching"])
def test_a_hopeless_run_is_strict_json_too(desk, model):
    from small_laboratory import METHOD, Line

    text = METHOD.format(name="other", analyte="alpha").replace('model = "line"', f'model = "{model}"')
    desk("method", "add", desk.file("other.toml", text))
    lines = [Line("S1", "standard", 1.0, 7.0), Line("S2", "standard", 2.0, "ERR"), unknown("U1", 3.0)]
    outcome = desk("log", desk.file("d.csv", header_block(lines, method="other")), "--json")
    assert outcome.code == 3
    check_entry(outcome.json["runs"][0])


def test_two_analytes_are_two_entries(desk):
    path = desk.file("two.csv", long_form({"alpha": a_day(), "beta": a_day(slope=7.0)}))
    said = ("--instrument", "LX-1", "--method", "line-a", "--method", "line-b")
    told = desk("log", path, *said, "--json").json
    assert [entry["run"]["method"] for entry in told["runs"]] == ["line-a", "line-b"]


def test_outside_the_range_the_estimate_is_named_as_such(worked):
    entry = worked("run", "show", 3, "--json").json
    check_entry(entry)
    quantities = {q["sample"]: q for q in entry["quantities"]}
    assert quantities["U2"]["concentration"] is None
    assert quantities["U2"]["stored_estimate"] == pytest.approx(14.0, abs=0.05)
    assert (quantities["U2"]["position"], entry["run"]["curve_run"]) == ("above", 1)


def test_later_unknowns_have_the_keys_of_a_logged_file(worked):
    text = header_block([unknown("U7", 4.0)], started="2026-04-01T16:00:00+02:00")
    told = worked("quantify", worked.file("more.csv", text), "--json").json
    assert told["schema"] == "calib-log-1"
    check_entry(told["runs"][0])


def test_a_preview_has_no_numbers_of_records(desk, day):
    told = desk("log", day, "--dry-run", "--json").json
    assert told["schema"] == "calib-preview-1"
    assert told.keys() == {"schema", "file", "fingerprint", "layout", "understood", "runs"}
    (entry,) = told["runs"]
    assert entry["curve"]["id"] is None
    assert entry["verdict"]["decision"] == "accepted"


@pytest.mark.parametrize(
    ("arguments", "schema", "keys"),
    [
        (("run", "list"), "calib-runs-1", {"runs"}),
        (("instrument", "list"), "calib-instruments-1", {"instruments"}),
        (("instrument", "show", "LX-1"), "calib-instruments-1", {"instrument", "events", "latest_runs"}),
        (("event", "list"), "calib-events-1", {"events"}),
        (("lot", "list"), "calib-lots-1", {"lots"}),
        (("method", "list"), "calib-methods-1", {"methods"}),
        (("method", "show", "line-a"), "calib-methods-1", {"methods"}),
        (("drift",), "calib-drift-list-1", {"reviews"}),
        (("drift", "LX-1"), "calib-drift-list-1", {"reviews"}),
        (("store", "check"), "calib-check-1", {"sound", "findings", "entries", "head_hash"}),
        (("store", "upgrade"), "calib-upgrade-1", {"path", "before", "after", "backup", "rows"}),
    ],
    ids=lambda value: " ".join(value) if isinstance(value, tuple) else "",
)
def test_every_listing_has_a_schema_and_its_keys(worked, arguments, schema, keys):
    outcome = worked(*arguments, "--json")
    assert (outcome.code, outcome.err) == (0, "")
    assert outcome.json["schema"] == schema
    assert outcome.json.keys() >= keys


@pytest.mark.parametrize(
    "arguments",
    [
        ("run", "exclude", "2", "#3", "--reason", "x"),
        ("run", "refit", "1", "--reason", "x"),
        ("run", "amend", "1", "--operator", "RS", "--reason", "x"),
        ("run", "void", "2", "--reason", "x"),
    ],
    ids=lambda value: value[1],
)
def test_every_correction_tells_the_run_as_it_is_then(worked, arguments):
    told = worked(*arguments, "--json").json
    check_entry(told)
    assert told == worked("run", "show", arguments[2], "--json").json
    assert told["amendments"][-1]["reason"] == "x"


def test_a_backup_tells_where_it_is(worked):
    told = worked("store", "backup", "--to", worked.folder / "copy.db", "--json").json
    assert (told["schema"], told["sound"]) == ("calib-backup-1", True)


def test_a_drift_review_tells_runs_limits_and_events(worked):
    (review,) = worked("drift", "LX-1", "--json").json["reviews"]
    assert review["schema"] == "calib-drift-1"
    assert review.keys() >= {"instrument", "method", "references", "runs", "events", "series", "provisional"}
    assert [run["decision"] for run in review["runs"]] == ["rejected", "accepted"]
    assert len(review["runs"][0]["shift_percent"]) == len(review["references"]) == 3
