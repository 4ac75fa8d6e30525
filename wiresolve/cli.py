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
from pathlib import Path
from typing import TYPE_CHECKING, Any, NoReturn

import click

from wiresolve.cli_gate_curve import gate_curve
from wiresolve.doctor import GMSH_LIBRARIES, examine, missing_library
from wiresolve.errors import InputError, WiresolveError
from wiresolve.terminal import ACCURACY_MISSED, INTERRUPTED, complain, heed_signals, judged, progress, read_problem, say

if TYPE_CHECKING:
    pass


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
            code = super().main(given, "wiresolve", complete_var, standalone_mode=False, **extra)
        except BaseException as fault:
            code = _explain(fault, debug)
        sys.exit(code if isinstance(code, int) else 0)

    def invoke(self, ctx: click.Context) -> Any:
        try:
            return super().invoke(ctx)
        except KeyboardInterrupt as fault:
            # Left to itself, click prints an empty line for it.
            raise click.Abort(*fault.args) from fault


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
        complain(f"{fault.format_message().rstrip('.')} (see '{path} --help')")
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
def program(debug: bool) -> None:
    """Subbands of a nanowire's section, each energy with its error bar, and what they mean for conductance.

    A wire file (TOML) describes the wire. "wiresolve check FILE" shows how it is understood, "wiresolve solve FILE"
    answers.
    """
    if debug or os.environ.get("WIRESOLVE_DEBUG"):
        logging.basicConfig(level=logging.INFO, stream=sys.stderr, force=True)
        logging.getLogger("wiresolve").setLevel(logging.DEBUG)


_file = click.argument("file", type=click.Path(path_type=Path))


@program.command()
@_file
@click.option("--out", type=click.Path(path_type=Path), help="Folder for the result [default: results/NAME].")
@click.option("--replace", is_flag=True, help="Replace an older result in --out; other files there stay.")
@click.option("--accuracy", metavar="ENERGY", help='Wanted error of each energy, e.g. "0.1 meV", over the file\'s.')
@click.option("--json", "as_json", is_flag=True, help="Print result.json instead of the verdict and the table.")
@click.option("--quiet", is_flag=True, help="Print nothing but errors (and what --json asks for).")
@click.option("--strict", is_flag=True, help="Exit with 2 if there is any warning.")
@click.option("--no-figures", is_flag=True, help="Draw no figures.")
def solve(
    file: Path,
    out: Path | None,
    replace: bool,
    accuracy: str | None,
    as_json: bool,
    quiet: bool,
    strict: bool,
    no_figures: bool,
) -> int:
    """Find the subbands of a wire and write them out.

    The folder holds input.toml, result.json, subbands.csv, modes.vtu (for ParaView) and figures. Without --out it is
    results/NAME in the current folder and takes the place of the last one; a folder named by --out is never
    overwritten unless --replace is given.
    """
    from wiresolve.output.folder import check_target, write
    from wiresolve.output.tables import DONE, result_json, summary

    problem = read_problem(file, accuracy)
    folder = Path("results") / file.stem if out is None else out
    may_replace = replace or out is None
    check_target(folder, replace=may_replace, field="--out")
    from wiresolve.solve import solve as find

    with progress(not quiet) as report:
        result = find(problem, on_progress=report)
        heed_signals()
        code, reasons = judged(result, strict, float(result.errors_eV.max()))
        status = "; ".join(reasons) or DONE
        if report is not None:
            report("writing", 1.0, str(folder))
        write(result, folder, replace=may_replace, figures=not no_figures, status=status, field="--out")
    if as_json:
        say(result_json(result, status).rstrip("\n"))
    elif not quiet:
        say(summary(result, folder, status))
    if reasons:
        complain(f"{'; '.join(reasons)}; the results are in {folder}, marked so")
    return code


program.add_command(gate_curve)


@program.command()
@_file
@click.option("--out", type=click.Path(path_type=Path), help="VTU file for the mesh [default: results/NAME.mesh.vtu].")
@click.option("--replace", is_flag=True, help="Replace the .vtu file named by --out.")
def mesh(file: Path, out: Path | None, replace: bool) -> int:
    """Mesh a wire's section and write the mesh for ParaView.

    It is the mesh on which a solve ends: fine enough for the accuracy that the wire file asks for.
    """
    from wiresolve.output.folder import check_file, writing
    from wiresolve.output.vtk import write_section

    problem = read_problem(file)
    wanted = out or Path("results") / f"{file.stem}.mesh.vtu"
    target = check_file(wanted, replace=replace or out is None, field="--out", suffix=".vtu", source=file)
    from wiresolve.physics.section_mesh import mesh as mesh_of

    with progress(True) as report:
        made = mesh_of(problem, report)
        heed_signals()
        with writing(target, "--out") as fresh:
            write_section(made.mesh, fresh)
    curved = f"{len(made.mesh.cells):,} curved cells of degree {made.mesh.degree}, {made.unknowns:,} unknowns"
    say(f"{curved}; {', '.join(f'{n:,} in {name}' for name, n in made.cells.items())}")
    say("Area: " + ", ".join(f"{name} {area:.6g} nm^2" for name, area in made.areas_nm2.items() if area))
    say(f"File: {out or target}")
    if not made.met:
        complain("the accuracy wanted was missed; this is the best mesh found")
    return 0 if made.met else ACCURACY_MISSED


@program.command()
@_file
def check(file: Path) -> None:
    """Print what is understood of a wire file.

    Every value with its unit; nothing is solved.
    """
    from wiresolve.describe.wirefile import describe
    from wiresolve.output.tables import described
    from wiresolve.physics import carrying
    from wiresolve.physics.wire import Wire

    problem = read_problem(file)
    say("\n".join(described(describe(problem) + carrying.described(Wire(problem)))))


@program.command()
@click.argument("name", required=False)
@click.option("--temperature", default="300 K", show_default=True, help="Lattice temperature of the values.")
@click.option("--file", "own", type=click.Path(path_type=Path), help="Also the materials of this TOML file.")
@click.option("--json", "as_json", is_flag=True, help="Print the materials as JSON.")
def materials(name: str | None, temperature: str, own: Path | None, as_json: bool) -> None:
    """List materials, or all values of one.

    NAME is one of the list or an alloy as a plain formula, like Al0.3Ga0.7As. Each value comes with what the literature
    spans, its source, and whether it was checked against it, is from memory, or differs between sources.
    """
    from wiresolve.describe import material_file
    from wiresolve.describe.material_changes import resolved
    from wiresolve.describe.materials import known, look_up, table_names, table_values, unknown
    from wiresolve.output import material_lists
    from wiresolve.output.tables import paragraphs
    from wiresolve.units import parse_quantity

    lattice_K = parse_quantity(temperature, "temperature", "--temperature")
    given = material_file.read("--file", own, Path()) if own is not None else ()
    found = {material.name: resolved(material, lattice_K) for material in given}
    if name is None:
        found |= {entry: look_up(entry, lattice_K) for entry in table_names() if entry not in found}
        if as_json:
            say(material_lists.as_json([(material, material.values) for material in found.values()]))
            return
        say("\n".join(material_lists.listing(list(found.values()))))
        say(f"at {lattice_K:g} K; unsure are values from memory and values on which sources differ")
        say("'wiresolve materials NAME' shows where each is from")
        return
    if name not in found and not known(name):
        raise unknown(name, tuple(found), "Or name the file that describes it with --file" if own is None else "")
    material = found[name] if name in found else look_up(name, lattice_K)
    values = material.values if name in found else table_values(name, lattice_K)
    if as_json:
        say(material_lists.as_json([(material, values)]))
        return
    say("\n".join(material_lists.value_table(values)))
    for code, text, remedy in material.notes:
        say("\n".join(["", *paragraphs(f"warning {code}: {text}"), *paragraphs(remedy, indent="    ")]))


@program.command()
def doctor() -> int:
    """Prove the installation.

    Checks packages and system libraries, and solves eight wires whose energies are known in closed form.
    """
    sound = True
    for line in examine():
        sound &= line.ok
        say(line.text)
    say("all is well" if sound else "something is amiss, see above")
    return 0 if sound else 1


def main(args: Sequence[str] | None = None) -> NoReturn:
    """Run the command line and leave the interpreter with its exit code."""

    heed_signals()
    # Libraries' own log lines and warnings are no answer to the user; --debug brings them back.
    logging.captureWarnings(True)
    logging.getLogger().addHandler(logging.NullHandler())
    program.main(args)
    raise SystemExit(0)
