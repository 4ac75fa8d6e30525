"""Every key of a wire file with its meaning. The reader has its own lists of keys; a test proves that they agree."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from wiresolve.describe import device_keys, problem, section, valley
from wiresolve.describe.key_kinds import (
    Choice,
    Either,
    Flag,
    Inner,
    Key,
    Named,
    Number,
    Quantity,
    Row,
    Text,
    Whole,
)
from wiresolve.describe.material import CRYSTALS, LIMITS
from wiresolve.describe.plain import LENGTH_KEYS
from wiresolve.describe.potential_file import FILE, SECTION
from wiresolve.units import UNITS

LENGTH = Quantity("length")
_COAT = Quantity("length", "5 nm")
_MASS = Number(0.067, valley.LIGHTEST, valley.HEAVIEST)
_UNIT = Choice(tuple(UNITS["length"]))
_MATRIX = Row(Row(Number(0.0), 3, 3), 3, 3, sample="[[15, 0, 0], [0, 15, 0], [0, 0, 15]]")
_DIRECTION = Row(Whole(1, -50, 50), 3, 3, sample="[1, 1, 0]")
_TEMPERATURE = Quantity("temperature", zero=True)
_CARRIERS = Choice((section.ADMITTED, section.EXCLUDED))
_OFFSET = Quantity("energy", "0.05 eV", signed=True)
_PATH = 1000


def _material(text: str, sample: str = "GaAs") -> Key:
    return Key("material", Text(sample, 60), text)


def _in_part(part: str) -> tuple[Key, ...]:
    """Keys that every part of a section has."""
    return (
        Key(
            "carriers", _CARRIERS, f"`admitted` (default), or `excluded` to keep carriers out of {part} by a hard wall"
        ),
        Key("offset", _OFFSET, f"shifts the band edge of {part}; `0 eV` if not given"),
        *device_keys.DOPING,
    )


SHAPES: Mapping[str, str] = MappingProxyType(
    {
        "circle": "`diameter`",
        "ellipse": "`width`, `height`",
        "rectangle": "`width`, `height`",
        "hexagon": "`across_flats` or `across_corners`; flats at top and bottom",
        "triangle": "`side`, or `base` and `height`; the base is below",
        "trapezoid": "`bottom`, `top`, `height`",
        "polygon": "`points`, pairs of numbers, and one `unit` for them",
        "outline": '`file` of points and their `unit` or `scale`, see "Traced outlines"',
        "mesh": '`file` and its `unit`, see "Sections meshed elsewhere"',
    }
)
"""The shapes, and the keys that give each its size."""
SHAPE = (
    Key("shape", Choice(tuple(LENGTH_KEYS)), "of the core (of a patch: its own); its sizes follow from it"),
    Key("diameter", LENGTH, "of a circle"),
    Key("width", LENGTH, "of an ellipse or a rectangle, along x"),
    Key("height", LENGTH, "of an ellipse, a rectangle, a triangle or a trapezoid, along y"),
    Key("across_flats", LENGTH, "of a hexagon: from one side to the opposite one"),
    Key("across_corners", LENGTH, "of a hexagon, instead: from corner to opposite corner"),
    Key("side", LENGTH, "of an equilateral triangle"),
    Key("base", LENGTH, "of an isosceles triangle, instead: its lowest side, beside its `height`"),
    Key("bottom", LENGTH, "of a trapezoid: its lower side"),
    Key("top", LENGTH, "of a trapezoid: its upper side"),
    Key(
        "points",
        Row(Row(Number(0.0), 2, 2), 3, sample="[[0, 0], [10, 0], [0, 10]]"),
        "of a polygon: pairs of bare numbers in its `unit`",
    ),
    Key("unit", _UNIT, "of the numbers of a polygon's `points`, or of the file of an outline or a mesh"),
    Key("corner_radius", Quantity("length", "2 nm", zero=True), "rounds every corner; not of circles, ellipses, files"),
    Key("rotation", Quantity("angle", signed=True), "counter-clockwise, of any shape"),
)
OUTLINE = (
    Key("file", Text("outline.csv", _PATH), "relative to the wire file"),
    Key("unit", _UNIT, "of the numbers in it; or instead"),
    Key("scale", Quantity("length", "0.42 nm"), "the length of one of them (a pixel)"),
    Key(
        "pixel_size",
        Quantity("length", "0.42 nm", zero=True),
        "how far points may lie beside the true edge: the curve is smoothed by as much, its area kept. Without it "
        "the `scale`; with `unit` and without it, the points are the corners of a polygon",
    ),
    Key("y_down", Flag(), "`true` where y counts downwards, as in pictures"),
)
MESH = (
    Key("file", Text("section.msh", _PATH), "the mesh, relative to the wire file"),
    Key("unit", _UNIT, "of its coordinates. The centre of its area becomes the origin"),
    Key(
        "array",
        Text("region"),
        "the cell data (integers) with the regions, where a file has several; `wiresolve check` tells which was taken",
    ),
    Key(
        "group_materials",
        Named(Either((Text("GaAs", 60), Inner("group"))), '{core = "GaAs"}'),
        "a table from the name of each group to a material, `void`, or `{material, carriers, offset}`, also with "
        "dopants",
    ),
)
SECTION_OWN = (
    _material(
        "of the core: a name from `wiresolve materials` or from `[materials]`, an alloy as a plain formula "
        '(`"In0.53Ga0.47As"`), or `void` for a hole'
    ),
    Key(
        "outside",
        Text(section.HARD_WALL, 60, (section.HARD_WALL,)),
        "`hard wall` (default), or a material that is extended outwards until the accuracy no longer sees where it "
        "ends",
    ),
    *_in_part("the core"),
    Key("lattice_temperature", _TEMPERATURE, "the temperature for gaps; the first carrier temperature if not given"),
    Key(
        "layers",
        Inner("layer", many=True),
        "shells around the core, each a `[[section.layers]]`, from the core outwards",
    ),
    Key("patches", Inner("patch", many=True), "shapes painted over what is there, each a `[[section.patches]]`"),
)
LAYER = (
    Key("thickness", _COAT, "of the shell; left out where it reaches to the next curve of an outline"),
    _material("of the shell", "Al0.3Ga0.7As"),
    Key(
        "sides",
        Named(Quantity("length", "0 nm", zero=True), '{bottom = "0 nm"}'),
        "around a polygon: thicknesses of the sides named, in place of `thickness`",
    ),
    *_in_part("the shell"),
)
PATCH = (
    _material("of the patch"),
    Key(
        "center",
        Row(Quantity("length", "3 nm", signed=True), 2, 2, sample='["3 nm", "0 nm"]'),
        "where its centroid lies, from that of the core; the middle if not given",
    ),
    *_in_part("the patch"),
)
GROUP = (_material("of the group"), *_in_part("the group"))


def _of_material(key: str, sample: str, text: str) -> Key:
    low, high, unit = LIMITS[key]
    if not unit:
        return Key(key, Number(float(sample), low, high), text)
    return Key(key, Quantity({"eV": "energy", "nm": "length"}[unit], sample, signed=low < 0), text)


MATERIAL = (
    Key("electron_mass", _MASS, "in m0, the same in all directions; or instead"),
    Key(
        "inverse_mass",
        _MATRIX,
        "a symmetric, positive definite 3 x 3 matrix in units of 1/m0, in the wire's frame; or instead",
    ),
    Key("valleys", Inner("valley", many=True, sample='[{name = "Delta", ...}]'), "a list, see below"),
    Key(
        "valley_degeneracy",
        Whole(2, 1, 48),
        "how many equal valleys each state stands for; 1 if not given; not with `valleys`",
    ),
    Key(
        "nonparabolicity",
        Number(2.5, 0, valley.STEEPEST_per_eV),
        "in 1/eV: alpha of E (1 + alpha E); not with `valleys`",
    ),
    _of_material("conduction_edge", "0.3 eV", "needed where two materials meet, on a scale common to both"),
    _of_material("gap", "0.35 eV", "of the bands, where acceptors need one"),
    _of_material("permittivity", "12.9", "relative, static"),
    _of_material("electron_affinity", "4.05 eV", "from the vacuum level down to the conduction edge"),
    Key("crystal", Choice(CRYSTALS), "without it a cubic crystal"),
    _of_material("lattice_constant", "0.565 nm", "of the cube, or of wurtzite across c"),
    _of_material("lattice_constant_c", "0.519 nm", "of wurtzite along c"),
    Key(
        "extends",
        Text("InAs", 60),
        "a name of the table: its values hold, those given here replace them, and the result says which: "
        "`electron_mass` or `inverse_mass` and `nonparabolicity` (of the zone centre), or `valleys`; "
        "`conduction_edge`, `permittivity`, `electron_affinity`, `lattice_constant`, `lattice_constant_c`; "
        "`crystal` together with `valleys`",
    ),
    Key("source", Text("notebook 12, page 44", 500), "where the values come from; repeated in the result"),
    Key(
        "given_in",
        Text("lab.toml", 300),
        "the file that a result's `input.toml` took the material from; written by the program",
    ),
)
VALLEY = (
    Key(
        "name",
        Text("Delta", 60, ("zone centre", "X", "Delta", "L", "any")),
        "of the valley; carriers pass from one material into another within valleys of one name. One named `any` "
        "continues every valley of its neighbours",
    ),
    Key("axis", _DIRECTION, "one of the crystal directions; all that the crystal makes equal to it are meant"),
    Key("longitudinal_mass", Number(0.92, valley.LIGHTEST, valley.HEAVIEST), "in m0, along `axis`"),
    Key(
        "transverse_mass",
        Number(0.19, valley.LIGHTEST, valley.HEAVIEST),
        "in m0, across `axis`; without an `axis` the two masses are equal",
    ),
    Key(
        "zone_boundary",
        Flag(),
        "`true` where a valley and its opposite are one (X: 3, L: 4); otherwise they are two (silicon's six)",
    ),
    Key("edge", Quantity("energy", "0.9 eV", signed=True), "above `conduction_edge`; `0 eV` if not given"),
    Key("nonparabolicity", Number(0.5, 0, valley.STEEPEST_per_eV), "in 1/eV"),
    Key("inverse_mass", _MATRIX, "of a valley without a direction: the matrix in the wire's frame"),
    Key("degeneracy", Whole(2, 1, 48), "of a valley without a direction: how many it stands for"),
)
ORIENTATION = (
    Key(
        "axis",
        _DIRECTION,
        "crystal direction along the wire. The table is needed where the lowest valley has a direction, and for "
        "wurtzite (three numbers of the hexagonal lattice, c the third)",
    ),
    Key("up", Row(Whole(1, -50, 50), 3, 3, sample="[0, 0, 1]"), "crystal direction along y, at right angles to `axis`"),
)
CARRIERS = (
    Key("kind", Choice(("electrons",)), "the only kind so far"),
    Key(
        "temperature",
        Either((_TEMPERATURE, Row(_TEMPERATURE, 1, problem.MOST_TEMPERATURES, distinct=True))),
        'one, or a list of them such as `["4.2 K", "77 K"]`; one with gates or charge',
    ),
    Key(
        "fermi_level",
        Quantity("energy", "0.15 eV", signed=True),
        "from the energy zero; may be left out. Not with gates or charge: there it is the zero",
    ),
    Key(
        "model",
        Choice((problem.NONPARABOLIC, problem.PARABOLIC)),
        "`nonparabolic` (default): masses grow with energy where alpha is known; `parabolic`: they do not",
    ),
    Key(
        "interaction",
        Choice((problem.HARTREE, problem.LOCAL_DENSITY)),
        "`hartree` (default): an electron feels the mean charge of all; `local density` adds exchange and "
        "correlation of a uniform gas",
    ),
)
ACCURACY = (
    Key("subbands", Whole(10, 1, problem.MOST_SUBBANDS), "how many subbands to list; 10 if not given"),
    Key("energy", Quantity("energy", "0.1 meV"), "the error bar that each may have at most; `0.1 meV` if not given"),
)
_SPACING = Quantity("energy", "5 meV", zero=True)
HARMONIC = (
    Key("x", _SPACING, "level spacing along x; `0 meV` where there is no parabola along it"),
    Key("y", _SPACING, "level spacing along y; `0 meV` where there is no parabola along it"),
)
POTENTIAL = (
    Key(
        "field",
        Row(Quantity("electric field", signed=True), 2, 2, sample='["0.01 V/nm", "0 V/nm"]'),
        "an electric field along x and y; an electron's energy rises along it",
    ),
    Key(
        "harmonic",
        Inner("harmonic", sample='{x = "5 meV", y = "5 meV"}'),
        "a parabola with these level spacings for the in-plane masses at the origin; `0 meV` for a direction "
        "without one",
    ),
    Key(
        "file",
        Text("potential.csv", _PATH),
        "a table of three columns x, y, energy (`.csv`, `.txt`, `.dat`), or a VTU file",
    ),
    Key("length_unit", Choice(tuple(UNITS["length"])), "of the coordinates in the file"),
    Key("energy_unit", Choice(tuple(UNITS["energy"])), "of the energies in the file"),
    Key("array", Text("energy"), "the point data of a VTU file with the energy"),
    Key(
        "origin",
        Choice((SECTION, FILE)),
        "`section`: x = y = 0 is the section's origin; `file`: that of the file of its outline or mesh. A section "
        "from a file needs it, others have `section`",
    ),
)
TOP = (
    Key(
        "title",
        Text("Round probe"),
        "of the wire, repeated in everything that is made of it; the file's name if not given",
    ),
    Key(
        "materials_file",
        Either((Text("lab.toml", _PATH), Row(Text("lab.toml", _PATH), 1))),
        "a file of materials of your own, or a list of them, relative to the wire file",
    ),
    Key("section", Inner("section"), "what the section is: its core, the layers around it and patches over it"),
    Key("materials", Named(Inner("material")), "materials of your own by name, each a `[materials.NAME]`"),
    Key("orientation", Inner("orientation"), "crystal directions along the wire and upwards"),
    Key("carriers", Inner("carriers"), "which carriers, at which temperatures"),
    Key("potential", Inner("potential"), "a potential given from outside"),
    Key("accuracy", Inner("accuracy"), "how many subbands are wanted, and how exactly"),
    *device_keys.TOP,
)
TABLES: Mapping[str, tuple[Key, ...]] = MappingProxyType(
    {
        "layer": LAYER,
        "patch": PATCH,
        "group": GROUP,
        "material": MATERIAL,
        "valley": VALLEY,
        "orientation": ORIENTATION,
        "carriers": CARRIERS,
        "accuracy": ACCURACY,
        "potential": POTENTIAL,
        "harmonic": HARMONIC,
        **device_keys.TABLES,
    }
)
"""The keys of every table but the section's and the patches' shapes, whose keys depend on the shape."""
