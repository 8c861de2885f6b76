"""The pictures: they build for every kind of run, and show what they must."""

from dataclasses import replace

import matplotlib as mpl
import numpy as np
import pytest
from matplotlib.axes import Axes
from matplotlib.figure import Figure

import calib
from calib.bench.records import RunRecord
from calib.bench.review_drift import DriftRecord
from calib.report.figures import curve_figure, drift_figure
from calib.report.files import picture


def legend_of(figure: Figure) -> set[str]:
    legends = [axes.get_legend() for axes in figure.axes]
    return {text.get_text() for legend in legends if legend for text in legend.get_texts()}


def words_of(figure: Figure) -> str:
    texts = [*figure.texts, *(t for axes in figure.axes for t in axes.texts)]
    return "\n".join(text.get_text() for text in texts)


def markers_of(axes: Axes) -> int:
    return sum(len(np.atleast_2d(c.get_offsets())) for c in axes.collections if c.get_zorder() == 4)


@pytest.mark.parametrize("name", ["falling", "rising", "rejected", "excluded", "saturated", "void"])
def test_every_kind_of_run_is_drawn(records: dict[str, RunRecord], name: str) -> None:
    figure = curve_figure(records[name])
    assert {"curve", "standard"} <= legend_of(figure)
    assert picture(figure, "png").startswith(b"\x89PNG")


def test_verdict_and_units_stand_in_the_picture(records: dict[str, RunRecord]) -> None:
    figure = curve_figure(records["rejected"])
    assert "REJECTED" in words_of(figure)
    labels = {axes.get_xlabel() for axes in figure.axes} | {axes.get_ylabel() for axes in figure.axes}
    assert {"algal toxin [ug/L]", "relative error [%]", "response"} <= labels
    assert "VOID" in words_of(curve_figure(records["void"]))


def test_excluded_and_saturated_standards_are_told_apart(records: dict[str, RunRecord]) -> None:
    assert "excluded" in legend_of(curve_figure(records["excluded"]))
    saturated = curve_figure(records["saturated"])
    assert "saturated" in legend_of(saturated)
    assert "2 standards without a response: not drawn" in words_of(saturated)


def test_every_standard_of_the_run_is_drawn_once(records: dict[str, RunRecord]) -> None:
    record = records["excluded"]
    bare = replace(record, evaluation=replace(record.evaluation, quantities=(), blanks=()))
    drawn = sum(s.response is not None for s in record.evaluation.standards)
    assert markers_of(curve_figure(bare).axes[0]) == drawn


def test_limits_are_wider_at_the_end_levels(records: dict[str, RunRecord]) -> None:
    below = next(a for a in curve_figure(records["falling"]).axes if a.get_ylabel() == "relative error [%]")
    steps = [patch.get_data().values for patch in below.patches]
    assert steps[0].tolist() == [40.0, 25.0, 25.0, 25.0, 25.0, 25.0, 25.0]
    assert steps[1].tolist() == (-steps[0]).tolist()


def test_a_run_without_unknowns_or_blanks(records: dict[str, RunRecord]) -> None:
    record = records["falling"]
    bare = replace(record, evaluation=replace(record.evaluation, quantities=(), blanks=()))
    figure = curve_figure(bare)
    assert legend_of(figure).isdisjoint({"blank", "unknown inside the range", "check standard"})
    assert len(figure.axes) == 2


def test_a_fit_without_parameters_says_so(records: dict[str, RunRecord]) -> None:
    record = records["falling"]
    curve = record.evaluation.curve
    nothing = replace(curve, values=np.full_like(curve.values, np.nan), converged=False)
    figure = curve_figure(replace(record, evaluation=replace(record.evaluation, curve=nothing)))
    assert "no curve: the fit gave no parameters" in words_of(figure)
    assert "curve" not in legend_of(figure)


def test_a_line_is_drawn_on_a_plain_axis(records: dict[str, RunRecord]) -> None:
    record = records["rising"]
    standards = record.evaluation.curve.standards
    line = calib.fit(standards.concentration, standards.response, model="line")
    figure = curve_figure(replace(record, evaluation=replace(record.evaluation, curve=line)))
    assert figure.axes[0].get_xscale() == "linear"
    assert figure.axes[0].get_xlim()[0] <= 0


def test_same_record_same_bytes(records: dict[str, RunRecord], young_drift: DriftRecord) -> None:
    for kind in ("svg", "png"):
        one, other = (picture(curve_figure(records["falling"]), kind) for _ in range(2))
        assert one == other
    assert picture(drift_figure(young_drift), "svg") == picture(drift_figure(young_drift), "svg")


def test_global_settings_are_left_alone(records: dict[str, RunRecord]) -> None:
    before = dict(mpl.rcParams)
    picture(curve_figure(records["falling"]), "svg")
    assert dict(mpl.rcParams) == before


def test_drift_without_limits(young_drift: DriftRecord) -> None:
    figure = drift_figure(young_drift)
    words = words_of(figure)
    assert "2 runs, 2026-03-02 to 2026-03-18; no limits yet (1 baseline run)" in words
    assert "no limits yet: 10 accepted runs are needed" in words
    assert len(figure.axes) == 8


def test_provisional_limits_are_dashed(provisional_drift: DriftRecord) -> None:
    figure = drift_figure(provisional_drift)
    assert "provisional limits" in words_of(figure)
    judged = [axes for axes in figure.axes if axes.get_ylabel().startswith("response")]
    limits = [line for axes in judged for line in axes.lines if line.get_color() == "#1f5f99"]
    assert len(limits) == 6
    assert all(line.get_linestyle() == "--" for line in limits)


def test_events_are_lettered_and_named(provisional_drift: DriftRecord) -> None:
    words = words_of(drift_figure(provisional_drift))
    assert "A  2026-03-26  part: enzyme membrane replaced" in words
    assert "B  2026-04-16  maintenance: amplifier found on the test gain" in words


def test_every_run_of_the_review_is_drawn(provisional_drift: DriftRecord) -> None:
    axes = next(a for a in drift_figure(provisional_drift).axes if a.get_ylabel().startswith("response"))
    values = provisional_drift.review.series[0].values
    assert markers_of(axes) == int(np.isfinite(values).sum())


def test_a_single_run_has_a_drift_picture(young_drift: DriftRecord) -> None:
    review = young_drift.review
    series = tuple(
        replace(s, values=s.values[:1], signals=s.signals[:1], reasons=s.reasons[:1], baseline=())
        for s in review.series
    )
    one = replace(
        young_drift,
        runs=young_drift.runs[:1],
        shift_percent=young_drift.shift_percent[:1],
        recovery_percent=young_drift.recovery_percent[:1],
        review=replace(review, series=series, accepted=review.accepted[:1]),
    )
    assert picture(drift_figure(one), "png")
