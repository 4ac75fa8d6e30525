"""The verdict: is it a one-dimensional channel, which steps will be seen, and up to which temperature."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from math import floor, isfinite, log10
from typing import Any

import numpy as np
from numpy.typing import NDArray

from wiresolve.errors import InputError
from wiresolve.physics.fermi import checked_temperature
from wiresolve.physics.spectrum import Spectrum
from wiresolve.physics.thermal import direction_dimensions, effective_dimension, first_level_share, first_level_share_at
from wiresolve.physics.transport import HIGHEST_TEMPERATURE_K, step_limits, steps
from wiresolve.units import CONDUCTANCE_QUANTUM_SIEMENS, KB

Array = NDArray[np.float64]

SINGLE_SUBBAND_SHARE = 0.95
"""Share of carriers in the first level from which the wire counts as one channel: what the others carry is then of the
order of other errors. Thin carriers reach it at 2.9 kT (single second level) or 3.6 kT (two-fold)."""
FROZEN_DIMENSION = 0.1
"""A confined direction that adds less to d is frozen out: a tenth of the 1 of a free one, about 99 % of the carriers in
its ground state."""
KNOWN_SHARE = 0.95
"""Carriers whose split over the directions must be known before a direction's d is stated."""
THERMAL_WIDTH_KT = 3.5254943480781717
"""Full width at half maximum of -df/dE in kT: 4 ln(1 + sqrt 2)."""
_KNOWN_REACH = 8.0
"""A limit is not searched at temperatures at which states 8 kT above the first subband are not known any more."""
_LOWEST_TEMPERATURE_K = 1e-3
_RUNGS = (97, 33)
"""Temperatures on a search's two ladders: 15 % apart, then 0.5 %; the straight line between is good to 1e-5."""


@dataclass(frozen=True)
class Judgement:
    """The verdict in words, and the numbers behind it as plain data.

    `single_subband`: `threshold_share`, `per_temperature` (each with `temperature_K, thermal_energy_eV,
    share_non_degenerate, share_at_fermi_level, holds`), `holds_up_to_K`, `holds_up_to_K_non_degenerate`,
    `searched_up_to_K` (a limit equal to it means "at least").
    `steps`: one a temperature, with `temperature_K, thermal_energy_eV, thermal_width_eV` and `levels`, the table of
    `transport.steps` with `plateau_up_to_K` and `shoulder_up_to_K` (1000 stands for "there or above").
    `effective_dimension`: one a temperature, with `temperature_K, d, frozen, frozen_up_to_K, searched_up_to_K` and
    `directions`, each with `name, d, frozen, frozen_up_to_K, searched_up_to_K` (d None where it is not known).
    """

    text: str
    single_subband: dict[str, Any]
    steps: tuple[dict[str, Any], ...]
    effective_dimension: tuple[dict[str, Any], ...]


def judge(
    spectrum: Spectrum,
    temperatures_K: Iterable[float],
    fermi_eV: float | None,
    remarks: Iterable[str] = (),
    held: str = "",
) -> Judgement:
    """Judge a wire from its spectrum.

    - Single-subband: at least 95 % of the carriers in the first level. With a Fermi level its occupation decides,
      without one that of thin carriers.
    - Steps: contrast of dG/dmu of the whole spectrum, over levels (`transport.steps`).
    - Effective dimension d = 2 <E - E_1>/kT of thin carriers, and which confined direction is frozen out.

    Parameters
    ----------
    temperatures_K : one or several, of the carriers.
    fermi_eV : from the energy zero, or None.
    remarks : sentences to append to the text.
    held : what the first sentence says of the conditions, in place of the Fermi level: " at these gate voltages".

    Raises
    ------
    InputError : without a temperature, for one below zero, or for a Fermi level that is not finite.
    """
    temperatures = checked_temperature(list(temperatures_K))
    if temperatures.ndim != 1 or temperatures.size == 0:
        raise InputError("temperature", "must be one or several temperatures", temperatures_K, "give e.g. [4.2, 77]")
    if fermi_eV is not None and not isfinite(fermi_eV):
        raise InputError("fermi_level", "must be finite", fermi_eV)
    single = _single_subband(spectrum, temperatures, fermi_eV)
    staircase = _staircase(spectrum, temperatures)
    dimension = _dimension(spectrum, temperatures)
    sentences = [_headline(spectrum, single, staircase, fermi_eV, held), _ladder(spectrum, staircase)]
    sentences += [_at_temperature(row, table) for row, table in zip(single["per_temperature"], staircase, strict=True)]
    sentences += [_dimension_sentence(dimension)]
    sentences += [remark.strip() for remark in remarks]
    return Judgement(" ".join(sentences), single, staircase, dimension)


def _search_limit(spectrum: Spectrum) -> float:
    known = float(spectrum.top_eV - spectrum.energy_eV[0]) / (_KNOWN_REACH * KB)
    return max(min(HIGHEST_TEMPERATURE_K, known), _LOWEST_TEMPERATURE_K)


def _holds_up_to(holds_by: Callable[[Array], Array], highest_K: float) -> float:
    """Highest temperature up to which `holds_by(temperatures)` stays >= 0 all the way from the cold; 0 if nowhere.

    Scanned on a ladder of temperatures, then between the two rungs where it first falls, then linearly.
    """
    if highest_K <= _LOWEST_TEMPERATURE_K:
        return highest_K
    low, high = _LOWEST_TEMPERATURE_K, highest_K
    for rungs in _RUNGS:
        ladder = np.geomspace(low, high, rungs)
        margin = holds_by(ladder)
        fails = np.flatnonzero(margin < 0)
        if not fails.size:
            return high
        first = int(fails[0])
        if first == 0:
            return low if rungs != _RUNGS[0] else 0.0
        low, high = float(ladder[first - 1]), float(ladder[first])
        ends = float(margin[first - 1]), float(margin[first])
    return low + (high - low) * ends[0] / (ends[0] - ends[1])


def _single_subband(spectrum: Spectrum, temperatures: Array, fermi_eV: float | None) -> dict[str, Any]:
    thin = first_level_share(spectrum, temperatures)
    filled = None if fermi_eV is None else first_level_share_at(spectrum, fermi_eV, temperatures)
    rows = []
    for index, temperature in enumerate(temperatures):
        share = float(thin[index]) if filled is None else float(filled[index])
        rows.append(
            {
                "temperature_K": float(temperature),
                "thermal_energy_eV": float(KB * temperature),
                "share_non_degenerate": float(thin[index]),
                "share_at_fermi_level": None if filled is None else share,
                "holds": share >= SINGLE_SUBBAND_SHARE,
            }
        )
    highest = _search_limit(spectrum)
    thin_limit = _holds_up_to(lambda t: first_level_share(spectrum, t) - SINGLE_SUBBAND_SHARE, highest)
    limit = thin_limit
    if fermi_eV is not None:
        limit = _holds_up_to(lambda t: first_level_share_at(spectrum, fermi_eV, t) - SINGLE_SUBBAND_SHARE, highest)
    return {
        "threshold_share": SINGLE_SUBBAND_SHARE,
        "per_temperature": rows,
        "holds_up_to_K": limit,
        "holds_up_to_K_non_degenerate": thin_limit,
        "searched_up_to_K": highest,
    }


def _staircase(spectrum: Spectrum, temperatures: Array) -> tuple[dict[str, Any], ...]:
    limits = {row["level"]: row for row in step_limits(spectrum)}
    nothing = {"plateau_up_to_K": None, "shoulder_up_to_K": None}
    return tuple(
        {
            "temperature_K": float(temperature),
            "thermal_energy_eV": float(KB * temperature),
            "thermal_width_eV": float(THERMAL_WIDTH_KT * KB * temperature),
            "levels": [{**row, **limits.get(row["level"], nothing)} for row in steps(spectrum, float(temperature))],
        }
        for temperature in temperatures
    )


def _dimension(spectrum: Spectrum, temperatures: Array) -> tuple[dict[str, Any], ...]:
    highest = _search_limit(spectrum)
    total = effective_dimension(spectrum, temperatures)
    limit = _holds_up_to(lambda t: 1 + FROZEN_DIMENSION - effective_dimension(spectrum, t), highest)
    parts, known = direction_dimensions(spectrum, temperatures)
    reach = highest
    if len(parts):
        reach = _holds_up_to(lambda t: direction_dimensions(spectrum, t)[1] - KNOWN_SHARE, highest)
    part_limits = [_holds_up_to(_part_margin(spectrum, index), reach) for index in range(len(parts))]
    rows = []
    for index, temperature in enumerate(temperatures):
        directions = []
        for name, values, part_limit in zip(spectrum.direction_names[: len(parts)], parts, part_limits, strict=True):
            d = float(values[index]) if known[index] >= KNOWN_SHARE else None
            directions.append(
                {
                    "name": name,
                    "d": d,
                    "frozen": None if d is None else d <= FROZEN_DIMENSION,
                    "frozen_up_to_K": part_limit,
                    "searched_up_to_K": reach,
                }
            )
        rows.append(
            {
                "temperature_K": float(temperature),
                "d": float(total[index]),
                "frozen": bool(total[index] <= 1 + FROZEN_DIMENSION),
                "frozen_up_to_K": limit,
                "searched_up_to_K": highest,
                "directions": directions,
            }
        )
    return tuple(rows)


def _part_margin(spectrum: Spectrum, direction: int) -> Callable[[Array], Array]:
    return lambda temperature: FROZEN_DIMENSION - direction_dimensions(spectrum, temperature)[0][direction]


def _headline(
    spectrum: Spectrum,
    single: dict[str, Any],
    staircase: tuple[dict[str, Any], ...],
    fermi_eV: float | None,
    held: str,
) -> str:
    where = "" if fermi_eV is None else f" with the Fermi level at {_millivolts(fermi_eV)}"
    where = held or where
    limit = _up_to(single["holds_up_to_K"], single["searched_up_to_K"])
    count = int((spectrum.level == 1).sum())
    what = "a single-subband channel" if count == 1 else f"a channel of one level, which is {count} subbands,"
    said = f"{what} {limit}" if single["holds_up_to_K"] > 0 else f"not {what.rstrip(',')} at any temperature"
    text = f"Design estimate for a ballistic wire{where}: {said}"
    first = staircase[0]["levels"][0]
    if first["plateau_up_to_K"] is None:
        return text + "."
    plateau = _up_to(first["plateau_up_to_K"], HIGHEST_TEMPERATURE_K)
    shoulder = _up_to(first["shoulder_up_to_K"], HIGHEST_TEMPERATURE_K)
    return text + f"; its first conductance step ends in a plateau {plateau} and in a shoulder {shoulder}."


def _ladder(spectrum: Spectrum, staircase: tuple[dict[str, Any], ...]) -> str:
    first = staircase[0]["levels"][0]
    text = f"The first level{_fold(spectrum, 1)} opens at {_millivolts(first['opens_at_eV'])} with "
    text += f"{_short(first['height_G0'])} G0 ({_short(first['height_G0'] * CONDUCTANCE_QUANTUM_SIEMENS * 1e6)} uS)"
    spacing = first["spacing_to_next_eV"]
    if spacing is None:
        return text + "; no level above it is known."
    second = int(np.unique(spectrum.level)[1])
    return text + f", the next{_fold(spectrum, second)} {_millivolts(spacing)} above it."


def _at_temperature(row: dict[str, Any], table: dict[str, Any]) -> str:
    scale = f"kT = {_millivolts(row['thermal_energy_eV'])}"
    ratio = table["levels"][0]["spacing_over_kT"]
    if row["temperature_K"] > 0:
        scale += f", thermal width 3.53 kT = {_millivolts(table['thermal_width_eV'])}"
    if ratio is not None:
        scale += f", first spacing {_short(ratio)} kT"
    said = "single-subband" if row["holds"] else "not single-subband"
    said += f", the first level holds {_percent(row['share_non_degenerate'])} of few carriers"
    if row["share_at_fermi_level"] is not None:
        said += f" and {_percent(row['share_at_fermi_level'])} of all with this Fermi level"
    return f"At {_short(row['temperature_K'])} K ({scale}): {said}{_steps_clause(table)}."


def _steps_clause(table: dict[str, Any]) -> str:
    judged = [row for row in table["levels"] if row["kind"] is not None]
    if not judged:
        return ""
    kinds = {"plateau": "a plateau", "shoulder": "only a shoulder", "merged": "merged with the second"}
    clause = f"; first step {kinds[judged[0]['kind']]} (contrast {_percent(judged[0]['contrast'])})"
    if len(judged) > 1:
        plateaus = sum(row["kind"] == "plateau" for row in judged)
        clause += f", {plateaus or 'none'} of {len(judged)} steps resolved as plateaus"
    return clause


def _dimension_sentence(dimension: tuple[dict[str, Any], ...]) -> str:
    values = ", ".join(f"{row['d']:.2f} at {_short(row['temperature_K'])} K" for row in dimension)
    frozen = [(part["name"], part) for part in dimension[0]["directions"]] or [("the section", dimension[0])]
    limits = [_up_to(part["frozen_up_to_K"], part["searched_up_to_K"]) for _, part in frozen]
    said = " and ".join(f"{name} is frozen out {limit}" for (name, _), limit in zip(frozen, limits, strict=True))
    return f"Effective dimension {values}; {said}."


def _fold(spectrum: Spectrum, level: int) -> str:
    count = int((spectrum.level == level).sum())
    words = {2: "two", 3: "three", 4: "four"}
    return "" if count == 1 else f" (a {words.get(count, str(count))}-fold orbital)"


def _up_to(limit_K: float, searched_K: float) -> str:
    if limit_K <= 0:
        return "at no temperature"
    if limit_K >= searched_K:
        if searched_K >= HIGHEST_TEMPERATURE_K:
            return f"up to {_short(HIGHEST_TEMPERATURE_K)} K and above"
        return f"up to at least {_short(searched_K, cut=True)} K"
    return f"up to {_short(limit_K, cut=True)} K"


def _millivolts(energy_eV: float) -> str:
    return f"{_short(1e3 * energy_eV)} meV"


def _short(value: float, cut: bool = False) -> str:
    """Three significant digits, never in powers of ten; `cut` does not round up (a limit must not be overstated)."""
    if value == 0:
        return "0"
    places = 2 - floor(log10(abs(value)))
    if cut:
        value = floor(value * 10.0**places * (1 + 1e-12)) / 10.0**places
    text = f"{round(value, places):.{max(places, 0)}f}"
    return text.rstrip("0").rstrip(".") if "." in text else text


def _percent(share: float) -> str:
    """A tenth of a percent, cut, not rounded, so that 94.96 % does not read as the threshold reached."""
    return f"{floor(1000 * share * (1 + 1e-12)) / 10:.1f} %"
