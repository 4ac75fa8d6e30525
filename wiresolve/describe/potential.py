"""A potential given from outside: a uniform field, a harmonic well, a file, or a Python function."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from dataclasses import dataclass, field
from types import BuiltinFunctionType, CodeType, ModuleType
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.describe import checks
from wiresolve.describe.potential_file import PotentialFile
from wiresolve.errors import InputError

Array = NDArray[np.float64]
STRONGEST_FIELD_V_per_nm = 10.0


@dataclass(frozen=True)
class Potential:
    """Parts of a potential, which add up; at least one is given.

    `field_V_per_nm` is the electric field F (an electron's energy rises by e F.r from the origin); `harmonic_eV` are
    the level spacings along x and y for the lowest valley's masses at the origin (0 in a direction without a well);
    `file` gives energies at points. `function` maps arrays x, y in nm to energies in eV. A function is known by its
    `name`, or by its code where it has no name and depends on nothing but numbers, texts and arrays.
    """

    field_V_per_nm: tuple[float, float] | None = None
    harmonic_eV: tuple[float, float] | None = None
    function: Callable[[Array, Array], Array] | None = None
    name: str = field(default="")
    file: PotentialFile | None = None

    def __post_init__(self) -> None:
        set_ = object.__setattr__
        if self.field_V_per_nm is not None:
            strongest = STRONGEST_FIELD_V_per_nm
            x, y = _pair("field", self.field_V_per_nm)
            along = (checks.in_range("field", v, -strongest, strongest, "V/nm") for v in (x, y))
            set_(self, "field_V_per_nm", tuple(along))
        if self.harmonic_eV is not None:
            x, y = _pair("harmonic", self.harmonic_eV)
            x, y = checks.in_range("harmonic.x", x, 0, 10, "eV"), checks.in_range("harmonic.y", y, 0, 10, "eV")
            for axis, value in (("x", x), ("y", y)):
                if 0 < value < 1e-6:
                    raise InputError(f"harmonic.{axis}", "must be 0 or at least 1e-6 eV", f"{value:g} eV")
            if x == y == 0:
                raise InputError("harmonic", "has no spacing in either direction", remedy="leave it out")
            set_(self, "harmonic_eV", (x, y))
        if self.function is not None:
            if not callable(self.function):
                raise InputError("function", "must be a function of x and y", self.function)
            if not self.name:
                code_digest(self.function)
        if self.file is not None and not isinstance(self.file, PotentialFile):
            raise InputError("file", "must be a PotentialFile", self.file)
        if self.field_V_per_nm is None and self.harmonic_eV is None and self.function is None and self.file is None:
            raise InputError("potential", "is empty", remedy="give a field or a harmonic well, or leave it out")

    @property
    def file_error_eV(self) -> float | None:
        """How far the energies between a file's points may be off; None without a file."""
        return None if self.file is None else self.file.error_eV

    @property
    def function_digest(self) -> str | None:
        """What stands for the function in a problem's digest."""
        if self.function is None:
            return None
        return f"name {self.name}" if self.name else f"code {code_digest(self.function)}"


def _pair(where: str, value: Any) -> tuple[Any, Any]:
    try:
        x, y = value
    except (TypeError, ValueError):
        raise InputError(where, "must be two values, along x and y", value) from None
    return x, y


def code_digest(function: Callable[..., Any]) -> str:
    """SHA-256 of a function's compiled code, defaults and enclosed values.

    Raises `InputError` where these are not all numbers, texts, arrays or tuples of them, so that nothing tells what the
    function does.
    """
    code = getattr(function, "__code__", None)
    if not isinstance(code, CodeType):
        raise InputError("function", "must have a name, since its code cannot be read", remedy='give name="..."')
    digest = hashlib.sha256()

    def add(value: object) -> None:
        if isinstance(value, CodeType):
            digest.update(value.co_code)
            for part in (*value.co_names, *value.co_varnames, *value.co_freevars):
                digest.update(part.encode() + b"\0")
            for constant in value.co_consts:
                add(constant)
        elif value is None or isinstance(value, bool | int | float | complex | str | bytes):
            digest.update(f"{type(value).__name__} {value!r}\0".encode())
        elif isinstance(value, tuple | frozenset):
            digest.update(f"{len(value)} of\0".encode())
            for part in sorted(value, key=repr) if isinstance(value, frozenset) else value:
                add(part)
        elif isinstance(value, np.ndarray):
            digest.update(f"{value.dtype} {value.shape}\0".encode() + value.tobytes())
        else:
            rule = f"must have a name, since it depends on a {type(value).__name__}"
            raise InputError("function", rule, remedy='give name="...", and change it with what the function does')

    add(code)
    add(getattr(function, "__defaults__", None))
    add(tuple(sorted((getattr(function, "__kwdefaults__", None) or {}).items())))
    for cell in getattr(function, "__closure__", None) or ():
        add(cell.cell_contents)
    outer = getattr(function, "__globals__", {})
    for word in sorted(w for w in set(code.co_names) if w in outer):
        value = outer[word]
        library = callable(value) and str(getattr(value, "__module__", "")).split(".")[0] in ("numpy", "scipy", "math")
        if not library and not isinstance(value, ModuleType | BuiltinFunctionType | np.ufunc | type):
            add(word)
            add(getattr(value, "__code__", value))
    return digest.hexdigest()
