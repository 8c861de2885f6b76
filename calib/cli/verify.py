"""calib verify."""

from __future__ import annotations

import click

from calib.cli.options import acting, by_option, echo_json, json_option, opened

DIFFERS = 1


@click.command()
@click.option("--list", "only_list", is_flag=True, help="Earlier verifications; nothing is computed.")
@by_option
@json_option
@click.pass_context
def verify(ctx: click.Context, only_list: bool, by: str | None, as_json: bool) -> int:
    """Compute published check values on this installation and keep the dated result.

    Exit code 1 when a figure differs.
    """
    from calib.bench.verify_installation import list_verifications, verify_installation

    with opened(ctx, create=not only_list) as store:
        records = list_verifications(store) if only_list else (verify_installation(store, by=acting(by)),)
    if as_json:
        from calib.report.as_json import plain

        verifications = [plain(r) | {"passed": r.passed} for r in records]
        echo_json({"schema": "calib-verify-1", "verifications": verifications})
        return 0 if only_list or records[0].passed else DIFFERS
    from calib.cli.screen import print_table, say
    from calib.report.wording import number

    if not only_list:
        print_table(
            ("Case", "Figure", ">Published", ">Computed", ">Tolerance", "", "Source"),
            [
                (
                    v.case,
                    v.what,
                    number(v.published, 10),
                    number(v.found, 10),
                    number(v.tolerance, 2),
                    "agrees" if v.agrees else "DIFFERS",
                    v.source.partition(";")[0],
                )
                for v in records[0].values
            ],
        )
    for record in records:
        wrong = sum(not v.agrees for v in record.values)
        told = ", ".join(f"{name} {version}" for name, version in record.versions.items())
        say(
            f"verification {record.number}, {record.at:%Y-%m-%d %H:%M} by {record.by}: "
            f"{len(record.values)} figures, {wrong or 'none'} differ ({told}; {record.platform})",
            "bold red" if wrong else None,
        )
    return 0 if only_list or records[0].passed else DIFFERS
