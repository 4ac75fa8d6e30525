"""The command line: a thin skin over the library, and the one place that turns an error into a line and a code.

Exit codes: 0 done; 1 internal fault; 2 wrong usage or input, or a warning under `--strict`; 3 no mesh; 4 not converged;
5 done but less accurate than asked; 130 interrupted.
"""

from __future__ import annotations

import errno
import logging
import os
import sys
from collections.abc import Sequence
from typing import Any, NoReturn

import click

from wiresolve.commands.doctor import GMSH_LIBRARIES, missing_library
from wiresolve.commands.gate_curve import gate_curve
from wiresolve.commands.input import check, materials, mesh
from wiresolve.commands.install import VARIABLE, completion, doctor
from wiresolve.commands.options import write_example
from wiresolve.commands.report import report
from wiresolve.commands.solve import solve
from wiresolve.commands.start import new, schema
from wiresolve.commands.terminal import INTERRUPTED, complain, heed_signals, log_to_stderr
from wiresolve.errors import InputError, WiresolveError

EXAMPLE = "wiresolve new circle > my.toml && wiresolve solve my.toml"


class _Program(click.Group):
    """The group of commands; whatever a command raises leaves as one line on stderr and an exit code."""

    def main(
        self,
        args: Sequence[str] | None = None,
        prog_name: str | None = None,
        complete_var: str | None = None,
        standalone_mode: bool = True,
        **extra: Any,
    ) -> Any:
        if not standalone_mode:
            return super().main(args, prog_name, complete_var, standalone_mode=False, **extra)
        given = list(sys.argv[1:] if args is None else args)
        debug = "--debug" in given or bool(os.environ.get("WIRESOLVE_DEBUG"))
        try:
            code = super().main(given, "wiresolve", complete_var or VARIABLE, standalone_mode=False, **extra)
        except BaseException as fault:
            code = _explain(fault, debug)
        sys.exit(code if isinstance(code, int) else 0)

    def invoke(self, ctx: click.Context) -> Any:
        try:
            return super().invoke(ctx)
        except KeyboardInterrupt as fault:
            # Left to itself, click prints an empty line for it.
            raise click.Abort(*fault.args) from fault

    def list_commands(self, ctx: click.Context) -> list[str]:
        """The commands in the order in which a newcomer needs them."""
        return list(self.commands)

    def format_epilog(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Write an example."""
        write_example(formatter, EXAMPLE)


def _explain(fault: BaseException, debug: bool) -> int:
    """Print the line for what stopped a command, and return its exit code."""
    if isinstance(fault, SystemExit):
        return fault.code if isinstance(fault.code, int) else 1
    if debug and not isinstance(fault, click.ClickException | click.Abort | KeyboardInterrupt):
        import traceback

        traceback.print_exception(fault)
    if isinstance(fault, click.exceptions.NoArgsIsHelpError):
        click.echo(fault.format_message(), err=True)
        return fault.exit_code
    if isinstance(fault, click.Abort | KeyboardInterrupt):
        complain(f"interrupted; {fault}" if str(fault) else "interrupted", "")
        return INTERRUPTED
    if isinstance(fault, click.UsageError):
        path = fault.ctx.command_path if fault.ctx else "wiresolve"
        said = " ".join(fault.format_message().replace(",\n", ", ").split()).rstrip(".")
        complain(f"{said} (see '{path} --help')")
        return fault.exit_code
    if isinstance(fault, click.ClickException):
        complain(fault.format_message())
        return fault.exit_code
    if isinstance(fault, WiresolveError):
        complain(str(fault))
        return fault.exit_code
    if isinstance(fault, OSError) and fault.errno in (errno.ENOSPC, errno.EDQUOT):
        complain("the disk is full; make room or write elsewhere")
        return InputError.exit_code
    if isinstance(fault, MemoryError):
        complain("out of memory; ask for fewer subbands or a larger error")
        return 1
    if library := missing_library(str(fault)):
        complain(f"the system library {library} is missing; as root on Debian: apt-get install {GMSH_LIBRARIES}")
        return 1
    hint = "" if debug else "; WIRESOLVE_DEBUG=1 shows where"
    complain(f"internal fault, please report it with the wire file: {type(fault).__name__}: {fault}{hint}")
    return 1


def _show_version(context: click.Context, _: click.Parameter, wanted: bool) -> None:
    if wanted:
        click.echo(sys.modules["wiresolve"].__version__)
        context.exit()


@click.group(cls=_Program, context_settings={"help_option_names": ["-h", "--help"]})
@click.option(
    "--version", is_flag=True, is_eager=True, expose_value=False, callback=_show_version, help="Print the version."
)
@click.option("--debug", is_flag=True, help="Log to stderr and show where a fault arose (also WIRESOLVE_DEBUG=1).")
@click.pass_context
def program(context: click.Context, debug: bool) -> None:
    """Subbands of a nanowire's section, each energy with its error bar, and what they mean for conductance.

    A wire file (TOML) describes the wire. "wiresolve new" prints one to start from, "wiresolve check" shows how it is
    understood, "wiresolve solve" answers. Exit codes: 0 done; 1 internal fault; 2 invalid input, or a warning under
    --strict; 3 no mesh; 4 not converged; 5 less accurate than asked; 130 interrupted.
    """
    if debug or os.environ.get("WIRESOLVE_DEBUG"):
        context.call_on_close(log_to_stderr())


for command in (new, check, solve, gate_curve, report, materials, mesh, schema, doctor, completion):
    program.add_command(command)


def main(args: Sequence[str] | None = None) -> NoReturn:
    """Run the command line and leave the interpreter with its exit code."""

    heed_signals()
    # Libraries' own log lines and warnings are no answer to the user; --debug brings them back.
    logging.captureWarnings(True)
    logging.getLogger().addHandler(logging.NullHandler())
    program.main(args)
    raise SystemExit(0)
