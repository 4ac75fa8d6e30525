"""What is written beside the tables of a run, as the user asks for it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from wiresolve.errors import InputError

if TYPE_CHECKING:
    from wiresolve.output.measured import Measured

CELLS = ("curved", "linear")
"""Kinds of cells in files for ParaView."""
MOST_FRAMES = 1000


@dataclass(frozen=True)
class Extras:
    """What beside the tables.

    Parameters
    ----------
    figures : the figures.
    report : `report.html`.
    vtk : cells of the files for ParaView, "curved" (of fourth order) or "linear".
    extrude_nm : a volume of this length along the wire, None for none.
    axial_frames : modes at so many wave numbers along the wire, 0 for none.
    quadrature : `modes.npz`, the modes at quadrature points with weights.
    matrix_elements : `matrix_elements.csv`.
    measured : points laid over the staircase.

    Raises
    ------
    InputError
        A kind of cells that there is not, a length that is not positive, a single frame or too many.
    """

    figures: bool = True
    report: bool = False
    vtk: str = "curved"
    extrude_nm: float | None = None
    axial_frames: int = 0
    quadrature: bool = False
    matrix_elements: bool = False
    measured: Measured | None = None

    def __post_init__(self) -> None:
        if self.vtk not in CELLS:
            raise InputError("vtk", f"must be one of {', '.join(CELLS)}", self.vtk)
        if self.extrude_nm is not None and not 0 < self.extrude_nm < float("inf"):
            raise InputError("extrude", "must be a positive length", self.extrude_nm, 'give one like "30 nm"')
        if self.axial_frames != 0 and not 2 <= self.axial_frames <= MOST_FRAMES:
            rule = f"must lie between 2 and {MOST_FRAMES}"
            raise InputError("axial_frames", rule, self.axial_frames, "give 11, or 0 for none")

    @property
    def linear(self) -> bool:
        """Whether cells are flat."""
        return self.vtk == "linear"
