"""Commands that look at what goes in: `check`, `mesh` and `materials`."""

from __future__ import annotations

from pathlib import Path

import click

import wiresolve.commands.options as options
from wiresolve.commands.terminal import ACCURACY_MISSED, complain, heed_signals, progress, read_problem, say, say_json


@click.command(cls=options.Command, example="wiresolve check geometries/core_shell_gaas.toml")
@options.file_argument
@options.together(
    options.as_json("Print the wire file as data, every default filled in."),
    options.quiet,
    options.verbose,
)
def check(file: Path, as_json: bool, quiet: bool) -> None:
    """Print what is understood of a wire file.

    Every value with its unit; nothing is solved. Exit code 2 where the file cannot be used.
    """
    from wiresolve.describe.wirefile import describe
    from wiresolve.output.tables import described, json_text
    from wiresolve.physics import carrying
    from wiresolve.physics.growing_masses import cost_text
    from wiresolve.physics.wire import Wire

    problem = read_problem(file)
    wire = Wire(problem)
    if as_json:
        say_json(json_text(problem.plain()))
    elif not quiet:
        cost = cost_text(wire)
        rows = describe(problem) + carrying.described(wire) + ([("time", cost)] if cost else [])
        say("\n".join(described(rows)))


@click.command(cls=options.Command, example="wiresolve mesh geometries/hexagon.toml --out hexagon.vtu")
@options.file_argument
@options.together(
    options.out("VTU file for the mesh [default: results/NAME.mesh.vtu].", "FILE.vtu"),
    options.replace("Replace the .vtu file named by --out."),
    options.vtk,
    options.as_json("Print the mesh's size and areas as JSON."),
    options.quiet,
    options.verbose,
)
def mesh(file: Path, out: Path | None, replace: bool, vtk: str, as_json: bool, quiet: bool) -> int:
    """Mesh a wire's section and write the mesh for ParaView.

    It is the mesh on which a solve ends: fine enough for the accuracy that the wire file asks for.
    """
    from wiresolve.output.tables import json_text
    from wiresolve.output.target import check_file, writing
    from wiresolve.output.vtk import write_section

    problem = read_problem(file)
    wanted = out or Path("results") / f"{file.stem}.mesh.vtu"
    target = check_file(wanted, replace=replace or out is None, field="--out", suffix=".vtu", source=file)
    from wiresolve.physics.section_mesh import mesh as mesh_of

    with progress(not quiet) as report:
        made = mesh_of(problem, report)
        heed_signals()
        with writing(target, "--out") as fresh:
            write_section(made.mesh, fresh, linear=vtk == "linear")
    size = {"cells": len(made.mesh.cells), "degree": made.mesh.degree, "unknowns": made.unknowns}
    if as_json:
        layers = {"cells_by_layer": dict(made.cells), "area_by_layer_nm2": dict(made.areas_nm2)}
        say_json(json_text({**size, **layers, "accuracy_met": made.met, "file": str(wanted)}))
    elif not quiet:
        curved = f"{size['cells']:,} curved cells of degree {size['degree']}, {size['unknowns']:,} unknowns"
        say(f"{curved}; {', '.join(f'{n:,} in {name}' for name, n in made.cells.items())}")
        say("Area: " + ", ".join(f"{name} {area:.6g} nm^2" for name, area in made.areas_nm2.items() if area))
        say(f"File: {wanted}")
    if not made.met:
        complain("the accuracy wanted was missed; this is the best mesh found")
    return 0 if made.met else ACCURACY_MISSED


def _known(context: click.Context, _: click.Parameter, begun: str) -> list[str]:
    """Names of materials that a shell proposes."""
    from wiresolve.describe.material_table import alloys, compounds

    return [name for name in (*compounds(), *alloys()) if name.lower().startswith(begun.lower())]


@click.command(cls=options.Command, example='wiresolve materials Al0.3Ga0.7As --temperature "77 K"')
@click.argument("name", required=False, shell_complete=_known)
@click.option("--temperature", default="300 K", show_default=True, help="Lattice temperature of the values.")
@click.option(
    "--file",
    "own",
    type=click.Path(path_type=Path),
    metavar="FILE.toml",
    help="Also the materials of this file, one table each.",
)
@options.as_json("Print the materials as JSON.")
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
            say_json(material_lists.as_json([(material, material.values) for material in found.values()]))
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
        say_json(material_lists.as_json([(material, values)]))
        return
    say("\n".join(material_lists.value_table(values)))
    for code, text, remedy in material.notes:
        say("\n".join(["", *paragraphs(f"warning {code}: {text}"), *paragraphs(remedy, indent="    ")]))
