"""Image charge of a carrier in a round wire whose surroundings have another permittivity."""

from __future__ import annotations

from typing import Any

from wiresolve.physics.image_charge import ground_state_shift, self_energy

SOURCE = (
    "reaction field of a cylinder's Green function: Y. M. Niquet and others, Phys. Rev. B 73, 165319 (2006);"
    " A. F. Slachmuylders and others, Phys. Rev. B 74, 235321 (2006) (citations from memory)"
)
CASES = {
    (12.9, 1.0): ([0.22838208239882, 0.23171719703, 0.24439334175, 0.28495388396], 0.39709836766, 70.962262),
    (11.7, 3.9): ([0.058578944867942, 0.060454348200, 0.067724492136, 0.091951483413], 0.16176531106, 19.898955),
    (11.7, 22.0): ([-0.016413073852786, -0.017380358271, -0.021207196764, -0.034537948138], -0.074954222277, None),
}


def entries(inside: float, outside: float) -> list[dict[str, Any]]:
    near, far, state = CASES[inside, outside]
    name, words = f"{inside:g}-in-{outside:g}", f"permittivity {inside:g} in {outside:g}"
    found: list[dict[str, Any]] = [
        {
            "id": f"image-charge.{name}",
            "what": f"self-energy in units of e²/(4 pi eps0 R) at 0, 0.25, 0.5 and 0.75 of the radius, {words}",
            "value": near,
            "digits": 10,
            "source": f"{SOURCE}; summed to ten digits",
            "tolerance_reason": "the digits of the sum",
            "compute": lambda: [self_energy(rho, inside, outside) for rho in (0.0, 0.25, 0.5, 0.75)],
        },
        {
            "id": f"image-charge.{name}-far-out",
            "what": f"the same at 0.9 of the radius, {words}",
            "value": far,
            "digits": 7,
            "source": f"{SOURCE}; summed over about 70 orders",
            "tolerance_reason": "orders fall like 0.81^m / m: the reference leaves out 3e-8 to 7e-8 of the value",
            "compute": lambda: self_energy(0.9, inside, outside),
        },
    ]
    if state is not None:
        found.append(
            {
                "id": f"image-charge.{name}-ground-state",
                "what": f"expectation in meV in the ground state of a hard wall of 5 nm radius, {words}",
                "value": state,
                "digits": 5,
                "source": f"{SOURCE}; by Gauss quadrature over the radius",
                "tolerance_reason": "the reference leaves out 2e-6 to 4e-6 of the value, near the surface",
                "compute": lambda: 1e3 * ground_state_shift(inside, outside, 5.0),
            }
        )
    return found


TRUTH: list[dict[str, Any]] = [entry for case in CASES for entry in entries(*case)]
