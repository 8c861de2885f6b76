"""Detection limits on the screen, each with the procedure it comes from."""

from __future__ import annotations

from typing import TYPE_CHECKING

from calib.cli.screen import print_table, say
from calib.report.wording import number, with_unit

if TYPE_CHECKING:
    from calib.bench.detection_limits import DetectionRecord

CURVE = "ISO 11843-5, from the curve alone"
SPIKED = "40 CFR 136, Appendix B, revision 2: larger of spikes and blanks"


def show_detection(record: DetectionRecord) -> None:
    """Limits of the latest curve, their medians over the runs, and the method detection limit."""
    say(f"{record.method} on {record.instrument}: accepted runs: {len(record.runs)}", "bold")
    say(f"  readings of a sample: {record.replicates}")
    rows = [
        (what, _amount(record, latest), _amount(record, typical), CURVE)
        for what, latest, typical in (
            ("decision limit", record.latest.critical, record.typical.critical),
            ("detection limit", record.latest.detectable, record.typical.detectable),
            ("quantification limit", record.latest.quantifiable, record.typical.quantifiable),
        )
    ]
    if record.method_limit is not None:
        rows.append(
            (
                f"method detection limit ({len(record.spikes)} spikes, {len(record.blanks)} blanks)",
                _amount(record, record.method_limit.value),
                "",
                SPIKED,
            )
        )
    print_table(("Limit", ">Latest", ">Median", "Procedure"), rows)
    say("  limits of one day's curve are estimates and no method detection limit; confirm them with samples")


def _amount(record: DetectionRecord, value: float) -> str:
    return with_unit(number(value, 3), record.unit)
