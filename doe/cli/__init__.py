"""The `doe` command: joins the rooms, prints, and turns errors into exit codes."""

import json
import os
import sys
from typing import Any

import click

from doe.cli.check import check
from doe.cli.compare import compare
from doe.cli.evaluate import evaluate
from doe.cli.export import export
from doe.cli.new import new
from doe.cli.run import run
from doe.cli.signoff import signoff
from doe.errors import DoeError, Fault


class Commands(click.Group):
    """The commands, which end well when the reader of their output has gone."""

    def invoke(self, ctx: click.Context) -> Any:
        """Run a command; a reader that has gone is no fault, a full disk behind stdout is."""
        try:
            status = super().invoke(ctx)
            sys.stdout.flush()
        except OSError as error:
            # Python must not try to write again at exit.
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
            if isinstance(error, BrokenPipeError):
                return 0
            print(f"error: stdout: cannot be written: {error.strerror}", file=sys.stderr)
            return 6
        return status


@click.group(
    cls=Commands, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100}
)
@click.version_option(package_name="doe")
def doe() -> None:
    """Design diffractive optical elements that can be made.

    A job is one TOML file. Start with `doe new grid -o job.toml`, look at `doe check job.toml`,
    then `doe run job.toml` and `doe export job/record.h5`.

    Exit status: 0 done and every limit met, 1 a limit missed, 2 command line, 3 config or input,
    4 damaged or unfitting file, 5 output in use or there already, 6 disk, 7 memory, 8 numerical
    failure, 130 or 143 stopped and resumable.
    """


for command in (new, check, run, compare, evaluate, export, signoff):
    doe.add_command(command)


def main() -> None:
    """Run the command line and leave with its exit status."""
    try:
        status = doe.main(standalone_mode=False)
    except DoeError as error:
        status = complain(error.as_json(), [str(fault) for fault in error.faults], error.exit_code)
    except click.ClickException as error:
        fault = Fault(error.format_message(), "see the command's --help", "correct the command")
        wrong = DoeError(fault).as_json() | {"exit": error.exit_code}
        usage = error.ctx.get_usage() if isinstance(error, click.UsageError) and error.ctx else ""
        lines = [error.format_message(), *([usage] if usage else [])]
        status = complain(wrong, lines, error.exit_code)
    except click.Abort:
        status = 130
    sys.exit(status if isinstance(status, int) else 0)


def complain(error: dict[str, object], lines: list[str], status: int) -> int:
    """Print an error as JSON where that was asked for, else as text; gives back the status."""
    if "--json" in sys.argv:
        print(json.dumps(error))
    else:
        for line in lines:
            print(f"error: {line}", file=sys.stderr)
    return status
