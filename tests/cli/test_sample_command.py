"""calib sample: what can be released, what waits, and why; nothing unapproved without DRAFT."""


def test_the_list_counts_and_gives_the_reasons(worked):
    out = worked("sample", "list", "--since", "2026-03-01").out
    assert "waits for review" in out.splitlines()[0]
    assert "run 3: not reviewed; run 1 holds a value too" in out


def test_no_number_of_an_unapproved_run_is_shown_without_draft(worked):
    for name in ("U1", "U2"):
        out = worked("sample", "show", name).out
        assert "DRAFT" in out
        numbers = [line for line in out.splitlines() if "±" in line]
        assert numbers
        assert all("DRAFT" in line for line in numbers)
    assert all("DRAFT" in line for line in worked("sample", "list").out.splitlines() if "±" in line)


def test_samples_as_json(worked):
    found = worked("sample", "list", "--json").json
    assert found["schema"] == "calib-samples-1"
    (u1,) = [s for s in found["samples"] if s["sample"] == "U1"]
    assert (u1["state"], u1["draft"]) == ("review", True)
    assert {r["run"] for r in u1["results"]} == {1, 2, 3}
    shown = worked("sample", "show", "U1", "--json").json["samples"]
    assert shown == [u1]


def test_a_state_and_a_day_may_be_asked_for(worked):
    assert worked("sample", "list", "--state", "release").out == "no samples\n"
    assert "--since 'soon' is no day" in worked.refused("sample", "list", "--since", "soon")
    assert "no run holds a sample 'X'" in worked.refused("sample", "show", "X")
