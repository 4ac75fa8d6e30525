"""Donors and acceptors of a part of the section."""

from __future__ import annotations

from dataclasses import dataclass

from wiresolve.describe import checks
from wiresolve.errors import InputError

FULL, PARTIAL = "full", "partial"
SOLUBLE_PER_NM3 = 0.5
"""5e20 cm^-3: more dopants than this are dissolved by hardly any crystal; a remark, not an error."""
DENSEST_PER_NM3 = 50.0
"""As many dopants as a crystal has atoms."""
DEEPEST_eV = 2.0


@dataclass(frozen=True)
class Doping:
    """Densities of donors and acceptors in 1/nm^3, and whether all of them are charged.

    With `ionisation` "partial" the charged part follows the Fermi level: `donor_depth_eV` is how far the donors' level
    lies below the conduction edge, `acceptor_depth_eV` how far the acceptors' lies above the valence edge.

    Raises `InputError` for a negative density and for partial ionisation without the depth.
    """

    donors_per_nm3: float = 0.0
    acceptors_per_nm3: float = 0.0
    ionisation: str = FULL
    donor_depth_eV: float | None = None
    acceptor_depth_eV: float | None = None

    def __post_init__(self) -> None:
        set_ = object.__setattr__
        checks.choice("ionisation", self.ionisation, (FULL, PARTIAL))
        for kind in ("donor", "acceptor"):
            density = checks.finite(f"{kind}s", getattr(self, f"{kind}s_per_nm3"))
            if not 0 <= density <= DENSEST_PER_NM3:
                rule = "must not be negative" if density < 0 else "is denser than a crystal's atoms"
                other = "acceptors" if kind == "donor" else "donors"
                remedy = f"write {other} for the other sign" if density < 0 else ""
                raise InputError(f"{kind}s", rule, f"{density * 1e21:.6g} cm^-3", remedy)
            set_(self, f"{kind}s_per_nm3", density)
            depth = checks.optional(f"{kind}_depth", getattr(self, f"{kind}_depth_eV"), 0, DEEPEST_eV, "eV")
            set_(self, f"{kind}_depth_eV", depth)
            if self.ionisation == PARTIAL and density and depth is None:
                sample = f'write e.g. {kind}_depth = "6 meV", or ionisation = "full"'
                raise InputError(f"{kind}_depth", 'is missing: ionisation = "partial" needs it', remedy=sample)
            if self.ionisation == FULL and depth is not None:
                rule = 'is given, but with ionisation = "full" all are charged'
                raise InputError(f"{kind}_depth", rule, f"{depth:g} eV", 'write ionisation = "partial"')
        if self.ionisation == PARTIAL and not self.any:
            raise InputError("ionisation", "is given without donors or acceptors", PARTIAL, "give a density too")

    @property
    def any(self) -> bool:
        """Whether there are dopants at all."""
        return bool(self.donors_per_nm3 or self.acceptors_per_nm3)

    @property
    def net_per_nm3(self) -> float:
        """Donors less acceptors, in 1/nm^3."""
        return self.donors_per_nm3 - self.acceptors_per_nm3


UNDOPED = Doping()
