"""The program `trainopt`: its commands and what holds for all of them.

Each command lives in a file of its own and imports what is heavy inside its function: `--help` is quick.
"""

from __future__ import annotations

import typer

from trainopt.cli.audit import audit
from trainopt.cli.check import check
from trainopt.cli.curve import curve
from trainopt.cli.design import design
from trainopt.cli.fields import fields
from trainopt.cli.new import new
from trainopt.cli.rate import rate
from trainopt.cli.report import report
from trainopt.cli.sheet import sheet
from trainopt.cli.simulate import simulate
from trainopt.cli.status import guarded
from trainopt.cli.sweep import sweep

EXIT_STATUSES = (
    "Exit status: 0 done, 1 a defect of the program, 2 the input is wrong, 3 no design exists, "
    "4 stopped at a limit without proof that nothing better exists."
)

program = typer.Typer(
    name="trainopt",
    help="Name the filter modules to buy for a clarification train, from bench runs; proven optimal.",
    epilog=EXIT_STATUSES,
    no_args_is_help=True,
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
)


def _print_version(wanted: bool) -> None:
    if wanted:
        from trainopt.version import __version__

        typer.echo(f"trainopt {__version__}")
        raise typer.Exit()


@program.callback()
def everywhere(
    version: bool = typer.Option(
        False, "--version", callback=_print_version, is_eager=True, help="Print the version and leave."
    ),
) -> None:
    """Options before any command."""


for command in (design, sweep, rate, simulate, audit, curve, check, sheet, report, new, fields):
    program.command()(guarded(command))
