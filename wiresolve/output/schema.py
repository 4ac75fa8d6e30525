"""JSON Schemas (draft 2020-12) of the wire file, `result.json` and `gate_curve.json`.

Only keywords are used that mean the same since draft 7, and no references, so that older editors read them too.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

from wiresolve.describe import wire_keys
from wiresolve.describe.key_kinds import (
    Choice,
    Either,
    Flag,
    Inner,
    Key,
    Kind,
    Named,
    Number,
    Quantity,
    Row,
    Text,
    Whole,
    spelled,
)
from wiresolve.describe.plain import LENGTH_KEYS
from wiresolve.describe.shape_tables import keys_of
from wiresolve.describe.wirefile import PATCH_KEYS, SECTION_KEYS
from wiresolve.output import result_keys

DRAFT = "https://json-schema.org/draft/2020-12/schema"
KINDS = ("wire", "result", "gate-curve")
"""What there are schemas of."""
Schema = dict[str, Any]
_NUMBER = r"([0-9]+\.?[0-9]*|\.[0-9]+)([eE][+-]?[0-9]{1,4})?"
_SIZES: dict[str, Schema] = {
    "hexagon": {"oneOf": [{"required": ["across_flats"]}, {"required": ["across_corners"]}]},
    "triangle": {"oneOf": [{"required": ["side"]}, {"required": ["base", "height"]}]},
    "polygon": {"required": ["points", "unit"]},
    "outline": {"required": ["file"], "oneOf": [{"required": ["unit"]}, {"required": ["scale"]}]},
    "mesh": {"required": ["file", "unit", "group_materials"]},
}
"""Which keys a shape needs, where it is not all of its lengths."""
_REQUIRED = {
    "layer": ("material",),
    "group": ("material",),
    "valley": ("name",),
    "orientation": ("axis", "up"),
    "carriers": ("temperature",),
    "harmonic": ("x", "y"),
    "gate": ("name",),
    "insulator": ("material", "thickness"),
    "arc": ("from", "to"),
    "surface": ("touches",),
    "surroundings": ("beside",),
    "slab": ("material", "thickness"),
    "stack end": ("gate",),
    "voltages": ("from", "to", "count"),
}
_ONE_OF = {"gate": ("lineup_voltage", "work_function"), "surface": ("pinned_at", "charge_density")}


def schema(kind: str) -> Schema:
    """The schema of a wire file ("wire"), of `result.json` ("result") or of `gate_curve.json` ("gate-curve")."""
    return {"wire": wire_schema, "result": result_schema, "gate-curve": gate_curve_schema}[kind]()


def wire_schema() -> Schema:
    """The schema of a wire file, as the data that a TOML reader makes of it."""
    made = _table(wire_keys.TOP, ("section", "carriers"))
    return {
        "$schema": DRAFT,
        "$id": "urn:wiresolve:schema:wire-file",
        "title": "wiresolve wire file",
        "description": "A nanowire's cross-section and what is asked of it. Quantities are texts with their unit.",
        **made,
    }


def result_schema() -> Schema:
    """The schema of `result.json`."""
    return _named("result", "What `wiresolve solve` found.", result_keys.result())


def gate_curve_schema() -> Schema:
    """The schema of `gate_curve.json`."""
    return _named("gate curve", "What `wiresolve gate-curve` found.", result_keys.gate_curve())


def _named(name: str, text: str, made: Schema) -> Schema:
    head = {"$schema": DRAFT, "$id": f"urn:wiresolve:schema:{name.replace(' ', '-')}", "title": f"wiresolve {name}"}
    return {**head, "description": text, **made}


def pattern(quantity: Quantity) -> str:
    """A regular expression (ECMA 262) that matches the texts which stand for a quantity of this kind."""
    sign = "[+-]?" if quantity.signed else r"\+?"
    end = rf"\s*({'|'.join(_escaped(unit) for unit in quantity.units)})\s*$"
    zero = "" if quantity.signed or quantity.zero else rf"(?![0.]+([eE][+-]?[0-9]+)?{end})"
    return rf"^\s*{sign}{zero}{_NUMBER}{end}"


def _escaped(text: str) -> str:
    return "".join(f"\\{c}" if c in r"\^$.|?*+()[]{}/" else c for c in text)


def _table(keys: Sequence[Key], required: Iterable[str] = ()) -> Schema:
    made: Schema = {"type": "object", "properties": {key.name: _described(key) for key in keys}}
    needed = list(required)
    return {**made, **({"required": needed} if needed else {}), "additionalProperties": False}


def _described(key: Key) -> Schema:
    sample = spelled(key.kind)
    text = key.text[:1].upper() + key.text[1:]
    shown = f" Such as {key.name} = {sample}." if sample and not isinstance(key.kind, Choice | Flag) else ""
    return {"description": text.rstrip(".") + "." + shown, **_of(key.kind)}


def _of(kind: Kind) -> Schema:
    """The schema of what may stand behind a key."""
    match kind:
        case Quantity():
            return {"type": "string", "pattern": pattern(kind), "examples": [kind.example]}
        case Text():
            usual = list(kind.usual) or [kind.sample]
            return {"type": "string", "minLength": 1, "maxLength": kind.longest, "examples": usual}
        case Choice():
            return {"enum": list(kind.words)}
        case Number():
            limits = {"minimum": kind.low, "maximum": kind.high}
            return {"type": "number", **{word: limit for word, limit in limits.items() if limit is not None}}
        case Whole():
            return {"type": "integer", "minimum": kind.low, "maximum": kind.high}
        case Flag():
            return {"type": "boolean"}
        case Row():
            return _row(kind)
        case Either():
            return {"anyOf": [_of(one) for one in kind.kinds]}
        case Named():
            return {"type": "object", "minProperties": 1, "additionalProperties": _of(kind.of)}
        case Inner():
            made = _inner(kind.table)
            return {"type": "array", "items": made} if kind.many else made


def _row(kind: Row) -> Schema:
    made: Schema = {"type": "array", "items": _of(kind.of), "minItems": kind.least}
    if kind.most is not None:
        made["maxItems"] = kind.most
    return made | ({"uniqueItems": True} if kind.distinct else {})


def _inner(table: str) -> Schema:
    if table == "section":
        return _section()
    if table == "patch":
        return _shaped(wire_keys.PATCH, PATCH_KEYS, patch=True)
    made = _table(wire_keys.TABLES[table], _REQUIRED.get(table, ()))
    if table in _ONE_OF:
        made["oneOf"] = [{"required": [key]} for key in _ONE_OF[table]]
    return made


def _section() -> Schema:
    made = _shaped(wire_keys.SECTION_OWN, SECTION_KEYS, patch=False)
    layered = {"properties": {"layers": {"items": {"required": ["thickness"]}}}}
    made["allOf"].append({"if": _is("outline"), "else": layered})
    return made


def _is(shape: str) -> Schema:
    return {"properties": {"shape": {"const": shape}}, "required": ["shape"]}


def _shaped(own: Sequence[Key], allowed: tuple[str, ...], patch: bool) -> Schema:
    """A table with a shape: each shape has keys of its own, and needs some of them."""
    described = {key.name: key for key in (*wire_keys.MESH, *wire_keys.OUTLINE, *wire_keys.SHAPE, *own)}
    shapes = [shape for shape in LENGTH_KEYS if not (patch and shape == "mesh")]
    if patch:
        described["shape"] = Key("shape", Choice(tuple(shapes)), "of the patch; its sizes follow from it")
        del described["group_materials"], described["array"]
    made = _table(tuple(described.values()), ("shape",))
    made["allOf"] = [
        {
            "if": _is(shape),
            "then": {
                "propertyNames": {"enum": list(keys_of(shape, allowed))},
                **_needed(shape),
            },
        }
        for shape in shapes
    ]
    return made


def _needed(shape: str) -> Schema:
    needs = {"required": [], **(_SIZES[shape] if shape in _SIZES else {"required": list(LENGTH_KEYS[shape])})}
    material = [] if shape == "mesh" else ["material"]
    return {**needs, "required": [*needs["required"], *material]}
