"""The page of a run: complete, escaped, self-contained."""

import re
from dataclasses import replace
from html.parser import HTMLParser

import pytest

from calib.bench.flags import FLAGS
from calib.bench.records import Amendment, QuantityRecord, RunRecord
from calib.report.html_report import render_run
from calib.report.run_rows import ABOUT_THE_INTERVAL, unknown_rows

NAMESPACES = {"http://www.w3.org/2000/svg", "http://www.w3.org/1999/xlink"}
VOID_TAGS = {"meta", "br", "link", "img", "hr"}


class Page(HTMLParser):
    """Text of a page, and whether its tags close in order."""

    def __init__(self, source: str) -> None:
        super().__init__()
        self.words: list[str] = []
        self.open: list[str] = []
        self.tags: set[str] = set()
        self.feed(source)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.add(tag)
        if tag not in VOID_TAGS:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.add(tag)

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        self.words.append(data)

    @property
    def text(self) -> str:
        return " ".join(" ".join(self.words).split())


def with_quantity(record: RunRecord, **changes: object) -> RunRecord:
    """The record with one unknown, changed."""
    q = next(q for q in record.evaluation.quantities if q.role == "unknown" and q.position == "inside")
    changed: QuantityRecord = replace(q, **changes)  # type: ignore[arg-type]
    return replace(record, evaluation=replace(record.evaluation, quantities=(changed,)))


@pytest.mark.parametrize("name", ["falling", "rising", "rejected", "excluded", "saturated", "void"])
def test_page_is_whole_and_refers_to_nothing_outside(records: dict[str, RunRecord], name: str) -> None:
    source = render_run(records[name])
    page = Page(source)
    assert page.open == []
    assert page.tags.isdisjoint({"script", "link", "img", "iframe", "metadata"})
    assert set(re.findall(r"https?://[^\s\"'<>]+", source)) <= NAMESPACES
    assert "url(" not in source.replace("url(#", "")
    assert source.count("DRAFT – not reviewed") == 1


def test_same_record_same_page(records: dict[str, RunRecord]) -> None:
    assert render_run(records["falling"]) == render_run(records["falling"])


def test_names_from_outside_are_escaped(records: dict[str, RunRecord]) -> None:
    record = with_quantity(records["falling"], sample="<script>alert(1)</script>")
    bad = Amendment(record.heading.at, "<i>KM</i>", "<b>", '"><svg onload=x>')
    heading = replace(record.heading, operator="<u>&", file="<a href='x'>")
    source = render_run(replace(record, heading=heading, amendments=(bad,)))
    assert "&lt;script&gt;alert(1)&lt;/script&gt;" in source
    assert Page(source).tags.isdisjoint({"script", "i", "b", "u", "a"})
    assert "<svg onload" not in source


@pytest.mark.parametrize("flag", sorted(FLAGS))
def test_every_flag_is_said_in_words(records: dict[str, RunRecord], flag: str) -> None:
    assert FLAGS[flag] in Page(render_run(with_quantity(records["falling"], flags=(flag,)))).text


@pytest.mark.parametrize("flag", ABOUT_THE_INTERVAL)
def test_of_a_censored_value_nothing_is_said_about_its_interval(
    records: dict[str, RunRecord], flag: str
) -> None:
    record = with_quantity(
        records["falling"], flags=("above-range", flag), position="above", concentration=None, estimate=99.9
    )
    (row,) = unknown_rows(record)
    assert (row.result, row.interval, row.expanded, row.k) == (
        "> 6.4 ug/L (highest standard): dilute",
        "–",
        "–",
        "–",
    )
    assert row.remarks == FLAGS["above-range"]
    assert "99.9" not in Page(render_run(record)).text


def test_verdict_comes_first_with_reasons_in_words_and_figures(records: dict[str, RunRecord]) -> None:
    text = Page(render_run(records["rejected"])).text
    assert text.index("REJECTED") < text.index("Instrument")
    assert "deviation of each check standard at most 30 %: beyond the limit: Q2 (C11) at 3 ug/L" in text
    assert "NOT KEPT" in text
    assert "no result" in text


def test_exclusion_is_told_with_reason_and_person(records: dict[str, RunRecord]) -> None:
    text = Page(render_run(records["excluded"])).text
    assert "Accepted with exclusions" in text
    assert "Excluded: S3 (V-08): vessel spilled." in text
    assert "vessel spilled RS" in text
    assert "Earlier curves of this run, kept and superseded: 1." in text


def test_void_run_gives_no_result(records: dict[str, RunRecord]) -> None:
    record = records["void"]
    assert "VOID The run counts no longer: wrong cap on the probe." in Page(render_run(record)).text
    assert {row.result for row in unknown_rows(record)} == {"no result"}


def test_absent_readings_are_listed_with_cause_and_place(records: dict[str, RunRecord]) -> None:
    text = Page(render_run(records["saturated"])).text
    assert re.search(r"S9 \(1[78]\), standard: overflow \(row \d+", text)


def test_unknowns_worst_first(records: dict[str, RunRecord]) -> None:
    rows = unknown_rows(records["falling"])
    assert [row.marked for row in rows] == sorted((row.marked for row in rows), reverse=True)
    assert rows[0].result == "< 0.25 ug/L (lowest standard)"
    assert next(row for row in rows if row.sample == "L-0302-01").result == "1.53 ug/L"


def test_kind_of_uncertainty_is_named(records: dict[str, RunRecord]) -> None:
    record = records["falling"]
    assert "U [ug/L] curve only k" in Page(render_run(record)).text
    first, *others = record.evaluation.quantities
    mixed = (replace(first, role="unknown", kind="combined"), *others)
    text = Page(render_run(replace(record, evaluation=replace(record.evaluation, quantities=mixed)))).text
    assert "U [ug/L] k Interval [ug/L] Kind" in text


def test_a_run_of_unknowns_names_the_run_of_its_curve(records: dict[str, RunRecord]) -> None:
    record = records["falling"]
    later = replace(record, heading=replace(record.heading, kind="unknowns", id=99), curve_run=1)
    text = Page(render_run(later)).text
    assert "Run 99: unknowns on an earlier curve" in text
    assert "The standards of run 1, whose curve is used here." in text


def test_record_is_traceable(records: dict[str, RunRecord]) -> None:
    record = records["rising"]
    text = Page(render_run(record)).text
    for what in (record.heading.fingerprint, record.chain_head, f"entry {record.chain_sequence}", "numpy"):
        assert what in text
    assert "(shown, not judged)" in text
    assert "1/d" in text
