"""Entry of the command line: finds the command, loads it, turns errors into one line."""

from __future__ import annotations

import gc
import sys
from importlib import import_module
from io import TextIOWrapper

import click

# Command, where it lives, and its line in the help. Only the command that runs is imported.
COMMANDS: dict[str, tuple[str, str]] = {
    "demo": ("demo:demo", "Set up the fictional laboratory and show today's results."),
    "instrument": ("instrument:instrument", "Register and list instruments."),
    "event": ("event:event", "Record what happened to an instrument."),
    "method": ("method:method", "Add and show method definitions."),
    "lot": ("lot:lot", "Register and list standard lots."),
    "log": ("log:log", "Log a file of standards: fit, judge, quantify."),
    "quantify": ("log:quantify", "Read later unknowns on the curve in force."),
    "rules": ("rules:rules", "Why a run has its verdict, and what would have to change."),
    "run": ("run:run", "List, show and correct runs."),
    "sample": ("sample:sample", "What can be released, what waits, and why."),
    "drift": ("drift:drift", "Review an instrument over time."),
    "replay": ("replay:replay", "Evaluate past runs under another method version; nothing is written."),
    "prove": ("prove:prove", "Simulate a method as it is: do its intervals cover, what do its rules notice."),
    "review": ("review:review", "What waits for a second person; approve or return it."),
    "person": ("person:person", "People, their roles, and rules about records."),
    "history": ("history:history", "Everything that happened to one record."),
    "trace": ("trace:trace", "Back from a result, forward from a lot, instrument, curve, …"),
    "audit": ("audit:audit", "The quality manager's lists."),
    "action": ("action:action", "Corrective actions, with the results they affect."),
    "verify": ("verify:verify", "Compute published check values on this installation."),
    "report": ("report:report", "Write the report of a run to a file."),
    "plot": ("report:plot", "Draw the curve of a run to a file."),
    "store": ("store:store", "Check, back up and upgrade the store."),
}


RARELY = 100_000


class LazyCommands(click.Group):
    """A group whose commands are imported only when they run."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Names in the order of a working day."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """Import the command of that name."""
        if cmd_name not in COMMANDS:
            return None
        module, name = COMMANDS[cmd_name][0].split(":")
        command = getattr(import_module(f"calib.cli.{module}"), name)
        assert isinstance(command, click.Command)
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """List the commands without importing them."""
        with formatter.section("Commands"):
            formatter.write_dl([(name, text) for name, (_, text) in COMMANDS.items()])


@click.group(cls=LazyCommands, context_settings={"help_option_names": ["-h", "--help"]})
@click.option("--store", metavar="URL", help="Store to use: a file or sqlite:///file. Else $CALIB_STORE.")
@click.version_option(package_name="calib", message="calib %(version)s")
@click.pass_context
def cli(ctx: click.Context, store: str | None) -> None:
    """Calibration curves of analytical instruments: logged, judged, used and reviewed.

    Exit codes: 0 done (and accepted), 1 bad input or refused, 2 usage,
    3 logged but a run rejected, 4 the store check found damage.
    """
    ctx.obj = store


def main() -> None:
    """Run the command line and leave with its exit code."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, TextIOWrapper):
            # A sign the terminal does not know must not stop a command whose work is done.
            stream.reconfigure(errors="replace")
    sys.exit(run(sys.argv[1:]))


def run(arguments: list[str]) -> int:
    """Run one command; its exit code."""
    from calib.errors import CalibError

    # A command is short and most of it is imports, which leave no garbage: collect rarely.
    gc.set_threshold(RARELY)
    try:
        code = cli.main(arguments, prog_name="calib", standalone_mode=False)
    except click.ClickException as error:
        error.show()
        return error.exit_code
    except click.Abort:
        click.echo("calib: stopped; what was logged before is kept", err=True)
        return 1
    except CalibError as error:
        click.echo(f"calib: {_one_line(str(error))}", err=True)
        return 1
    except SystemExit:
        # click and rich leave in this way, and no other, when whoever reads the output closed the pipe.
        return 0
    return code if isinstance(code, int) else 0


def _one_line(text: str) -> str:
    return " ".join(text.split())
