"""The report: one file that holds all it shows, says what its folder says, and whose sliders compute as Python does."""

from __future__ import annotations

import json
import math
import re
import shutil
from collections.abc import Iterator
from dataclasses import replace
from html.parser import HTMLParser
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import expit, jn_zeros

from tests.gate_sweeps import PlateSweep, swept_problem
from wiresolve.describe import wirefile
from wiresolve.errors import InputError
from wiresolve.gate_curve import gate_curve
from wiresolve.output import report, writing
from wiresolve.output.between_points import between
from wiresolve.output.measured import Measured
from wiresolve.physics import statistics
from wiresolve.physics.fermi import occupation
from wiresolve.physics.plain_spectrum import plain, spectrum_of_plain
from wiresolve.physics.spectrum import Spectrum
from wiresolve.result import Result
from wiresolve.solve import solve
from wiresolve.units import HBAR2_OVER_2M0, KB

MASS, RADIUS_NM = 0.067, 12.5
WIRES = {
    # a constant mass: parabolas
    "parabolic": f"""
title = "Round wire"
[section]
shape = "circle"
diameter = "{2 * RADIUS_NM} nm"
material = "plain"
[materials.plain]
electron_mass = {MASS}
permittivity = 12.9
source = "invented"
[carriers]
temperature = ["4.2 K", "77 K"]
[accuracy]
subbands = 8
energy = "0.05 meV"
""",
    # one growing mass all over: closed forms
    "growing": """
title = "Grown wire"
[section]
shape = "hexagon"
across_flats = "30 nm"
material = "InAs"
[carriers]
temperature = ["4.2 K", "77 K"]
fermi_level = "0.12 eV"
[accuracy]
subbands = 6
energy = "0.2 meV"
""",
    # several valleys with their own masses
    "valleys": """
title = "Valleys"
[section]
shape = "circle"
diameter = "6 nm"
material = "Si"
[orientation]
axis = [1, 1, 0]
up = [0, 0, 1]
[carriers]
temperature = ["77 K", "300 K"]
[accuracy]
subbands = 8
energy = "0.5 meV"
""",
    # masses that differ from place to place: tables of E(k); transmissions and contacts
    "tables": """
title = "Channel in a shell"
[section]
shape = "circle"
diameter = "16 nm"
material = "GaAs"
[[section.layers]]
thickness = "8 nm"
material = "Al0.3Ga0.7As"
[transport]
transmission = [0.9, 0.7]
contact_resistance = "800 ohm"
[carriers]
temperature = ["4.2 K", "77 K"]
[accuracy]
subbands = 6
energy = "0.5 meV"
""",
    # steps rounded by tunnelling too
    "saddle": f"""
title = "Constriction"
[section]
shape = "circle"
diameter = "{2 * RADIUS_NM} nm"
material = "plain"
[materials.plain]
electron_mass = {MASS}
permittivity = 12.9
source = "invented"
[transport]
saddle = "8 meV"
contact_resistance = "500 ohm"
[carriers]
temperature = "20 K"
[accuracy]
subbands = 5
energy = "0.2 meV"
""",
}
SETTINGS = ((0.0, 0.31), (4.2, 0.55), (77.0, 0.9))
"""Temperatures in K, and Fermi levels as parts of the way from the first to the last listed level."""


class Wire:
    """A solved wire and its folder."""

    def __init__(self, name: str, folder: Path) -> None:
        source = folder / f"{name}.toml"
        source.write_text(WIRES[name], encoding="utf-8")
        self.result: Result = solve(wirefile.read(source))
        self.folder = writing.write(self.result, folder / name, figures=False)
        self.page = report.write_report(self.folder)

    def fermi_eV(self, part: float) -> float:
        energies = self.result.energies_eV
        return float(energies[0] + part * (energies[-1] - energies[0]))


@pytest.fixture(scope="module")
def wires(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Wire]:
    folder = tmp_path_factory.mktemp("reports")
    return {name: Wire(name, folder) for name in WIRES}


@pytest.fixture(scope="module")
def swept(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("swept") / "curve"
    curve = gate_curve(swept_problem(7), solver=PlateSweep)
    writing.write(curve, folder, figures=False)
    report.write_report(folder)
    return folder


@pytest.fixture(scope="module")
def browser(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Any]:
    """Chromium without a screen."""
    from selenium import webdriver
    from selenium.webdriver.chrome import service

    program = next(filter(None, map(shutil.which, ("chromium", "chromium-browser", "google-chrome"))), None)
    driver = shutil.which("chromedriver")
    if program is None or driver is None:
        pytest.skip("there is no chromium with its chromedriver on this machine")
    options = webdriver.ChromeOptions()
    options.binary_location = program
    profile = tmp_path_factory.mktemp("profile")
    words = "headless no-sandbox disable-gpu disable-quic no-first-run disable-background-networking"
    for word in (*words.split(), "disable-component-update", "disable-sync", f"user-data-dir={profile}"):
        options.add_argument(f"--{word}")
    options.set_capability("goog:loggingPrefs", {"browser": "ALL"})
    found = webdriver.Chrome(options=options, service=service.Service(driver))
    try:
        yield found
    finally:
        found.quit()


def opened(browser: Any, page: Path, width: int = 1300) -> Any:
    """The page in the browser; nothing in it may have failed or been refused."""
    screen = {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": width < 600}
    browser.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", screen)
    browser.get(page.resolve().as_uri())
    browser.execute_script("document.documentElement.style.scrollBehavior = 'auto'")
    assert [entry["message"] for entry in browser.get_log("browser")] == []
    return browser


def computed(browser: Any, expression: str) -> Any:
    """What the page's own sums give; numbers that are exact come as whole ones."""
    return browser.execute_script(f"const {{model, data}} = window.wiresolveReport; return {expression};")


def direct_sum(energies_eV: Any, fermi_eV: float, kT: float) -> float:
    """Carriers per nm of parabolas with two spins, by quadrature over k."""

    def occupied(lowest: float) -> float:
        reach = np.sqrt(max(fermi_eV - lowest, 0.0) + 60 * kT) * np.sqrt(MASS / HBAR2_OVER_2M0)

        def filling(k: float) -> float:
            return float(expit((fermi_eV - lowest - HBAR2_OVER_2M0 / MASS * k * k) / kT))

        inner = [np.sqrt(max(fermi_eV - lowest, 0.0) * MASS / HBAR2_OVER_2M0)]
        return float(quad(filling, 0, reach, points=inner, limit=400, epsabs=0, epsrel=1e-11)[0])

    return sum(2 / np.pi * occupied(float(e)) for e in energies_eV)


def test_sums_of_the_page_are_the_closed_forms_of_a_round_wire(browser: Any, wires: dict[str, Wire]) -> None:
    # Hard wall: E = hbar^2 j^2 / 2 m R^2 with the zeros of the Bessel functions; the sliders' sums at the exact levels
    # must agree with direct quadrature over the levels that the page holds, and these with the Bessel zeros.
    page = opened(browser, wires["parabolic"].page)
    levels = sorted((jn_zeros(m, 3)[n] for m in range(4) for n in range(3)), key=float)
    listed = [s["lowest"] for s in computed(page, "data.wire.states")][:8]
    exact = HBAR2_OVER_2M0 / MASS / RADIUS_NM**2 * np.array(levels[:5]) ** 2
    assert np.unique(np.round(listed, 6)) == pytest.approx(exact, abs=5e-5)
    for kelvin, fermi in ((4.2, 0.05), (30.0, 0.02), (77.0, 0.06)):
        states = [s["lowest"] for s in computed(page, "data.wire.states")]
        sums = computed(page, f"model.bySubband({fermi}, {kelvin}).reduce((a, b) => a + b)")
        assert sums == pytest.approx(direct_sum(states, fermi, KB * kelvin), rel=1e-9)


@pytest.mark.parametrize("name", WIRES)
def test_sliders_give_the_numbers_of_python(browser: Any, wires: dict[str, Wire], name: str) -> None:
    wire = wires[name]
    page, spectrum = opened(browser, wire.page), wire.result.spectrum
    edges = wire.result.density_of_states.edges_eV
    for kelvin, part in SETTINGS:
        fermi = wire.fermi_eV(part)
        at = [fermi, fermi - 0.004, fermi + 0.011]
        conductance = computed(page, f"model.conductance({at}, {kelvin})")
        assert conductance == pytest.approx(wire.result.conductance_at(at, kelvin).tolist(), rel=1e-6, abs=1e-12)
        listed = computed(page, f"model.bySubband({fermi!r}, {kelvin})")
        expected = statistics.line_density_by_subband(spectrum, fermi, kelvin)
        assert listed == pytest.approx(expected.tolist(), rel=1e-7, abs=1e-15)
        total = computed(page, f"model.lineDensity({fermi!r}, {kelvin})")
        assert total == pytest.approx(wire.result.line_density(fermi, kelvin), rel=1e-7)
        middles = (edges[1:] + edges[:-1]) / 2
        filled = wire.result.density_of_states.per_eV_nm * occupation(middles, fermi, kelvin)
        assert computed(page, f"model.filled({fermi!r}, {kelvin})") == pytest.approx(filled.tolist(), rel=1e-9)
    states = computed(page, "model.densityOfStates(data.wire.bins.edges)")
    top = float(wire.result.density_of_states.per_eV_nm.max())
    assert states == pytest.approx(wire.result.density_of_states.per_eV_nm.tolist(), rel=1e-6, abs=1e-9 * top)


def test_readings_follow_the_sliders(browser: Any, wires: dict[str, Wire]) -> None:
    from selenium.webdriver.common.by import By
    from selenium.webdriver.common.keys import Keys

    wire = wires["growing"]
    page = opened(browser, wire.page)
    drawn = ("draw-states", "draw-staircase", "draw-occupation")
    before = [page.find_element(By.ID, name).get_attribute("innerHTML") for name in drawn]
    for kelvin, part in SETTINGS[1:]:
        fermi = round(wire.fermi_eV(part), 5)
        for name, value in (("kelvin", kelvin), ("fermi", round(1e3 * fermi, 3))):
            field = page.find_element(By.ID, f"{name}-number")
            field.send_keys(Keys.CONTROL, "a")
            field.send_keys(str(value))
        said = page.find_element(By.ID, "says-conductance").text.split(" G0")[0]
        assert float(said) == pytest.approx(float(wire.result.conductance_at(fermi, kelvin)), abs=2e-3)
        said = page.find_element(By.ID, "says-density").text.split(" per nm")[0]
        assert float(said) == pytest.approx(wire.result.line_density(fermi, kelvin), rel=1e-3)
        after = [page.find_element(By.ID, name).get_attribute("innerHTML") for name in drawn]
        assert all(one != other for one, other in zip(before, after, strict=True))
        before = after
        # the table of the last figure follows too: its first row is the first level's
        told = page.execute_script("return document.querySelector('#numbers-occupation td').textContent")
        first = statistics.line_density_by_subband(wire.result.spectrum, fermi, kelvin)[0]
        assert float(told) == pytest.approx(first, rel=1e-3)
    # the keyboard moves the slider, and what it means is told
    slider = page.find_element(By.ID, "fermi-slider")
    at = float(page.find_element(By.ID, "fermi-number").get_attribute("value"))
    slider.send_keys(Keys.ARROW_LEFT, Keys.ARROW_LEFT)
    moved = float(page.find_element(By.ID, "fermi-number").get_attribute("value"))
    assert moved < at
    assert slider.get_attribute("aria-valuetext") == f"{moved:g} meV"
    page.execute_async_script("setTimeout(arguments[0], 600)")
    assert f"{moved:g} meV" in page.find_element(By.ID, "announced").get_attribute("textContent")


def test_gate_slider_meets_the_solved_points(browser: Any, swept: Path) -> None:
    page = opened(browser, swept / report.REPORT)
    found = json.loads((swept / "gate_curve.json").read_text(encoding="utf-8"))
    for point in found["points"]:
        voltage = point["gate_voltage_V"]
        densities = computed(page, f"model.bySubband({voltage!r})")
        assert sum(densities) == pytest.approx(sum(point["line_density_by_subband_per_nm"]), rel=1e-6)
        assert computed(page, f"model.conductance({voltage!r})") == pytest.approx(point["conductance_G0"], rel=1e-6)
    # The curve that is drawn is that of figures, by Python, and the slider's dot lies on it.
    at, drawn = computed(page, "data.sweep.at"), computed(page, "data.sweep.conductance")
    assert computed(page, "data.sweep.at.map(model.conductance)") == pytest.approx(drawn, rel=1e-6, abs=2e-7)
    swept_by_python = between(found["points"], found["steps"], found["temperature_K"], None)
    assert swept_by_python is not None
    assert swept_by_python.conductance_G0(np.array(at)) == pytest.approx(drawn, abs=1e-7)
    # Between points all levels fall together, as the plates' do: closed within what a cubic between points leaves.
    exact = PlateSweep(swept_problem(13)).point(swept_problem(13).voltages.points[7], None)  # type: ignore[union-attr]
    there = computed(page, f"model.at({exact.gate_voltage_V!r}).map((s) => s.lowest)")
    assert sorted(there)[:6] == pytest.approx(np.sort(exact.energy_eV).tolist(), abs=1e-3)


def test_the_page_asks_for_nothing_and_fits_every_width(browser: Any, wires: dict[str, Wire], swept: Path) -> None:
    for path in (wires["valleys"].page, wires["tables"].page, swept / report.REPORT):
        for width in (380, 700, 1300):
            page = opened(browser, path, width)
            assert page.execute_script("return performance.getEntriesByType('resource').length") == 0
            wide = page.execute_script("return document.documentElement.scrollWidth")
            assert wide <= width
            assert page.execute_script("return document.querySelectorAll('.canvas:empty').length") == 0
            unnamed = "return [...document.querySelectorAll('.canvas svg')].filter((s) => !s.ariaLabel).length"
            assert page.execute_script(unnamed) == 0


class Structure(HTMLParser):
    """Elements of a page with their attributes, in order."""

    def __init__(self, page: str) -> None:
        super().__init__()
        self.found: list[tuple[str, dict[str, str | None]]] = []
        self.feed(page)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.found.append((tag, dict(attrs)))

    def of(self, tag: str) -> list[dict[str, str | None]]:
        return [attributes for name, attributes in self.found if name == tag]


def pages(wires: dict[str, Wire], swept: Path) -> list[str]:
    return [wire.page.read_text(encoding="utf-8") for wire in wires.values()] + [
        (swept / report.REPORT).read_text(encoding="utf-8")
    ]


def test_one_file_that_refers_to_nothing(wires: dict[str, Wire], swept: Path) -> None:
    for page in pages(wires, swept):
        assert len(page.encode()) < 5_000_000
        for tag, attributes in Structure(page).found:
            for name in ("src", "href", "srcset", "action", "data", "poster"):
                value = attributes.get(name) or ""
                assert value == "" or value.startswith(("#", "data:image/")), (tag, name, value)
        styles = re.findall(r"<style>(.*?)</style>", page, re.DOTALL)
        assert not any("url(" in style or "@import" in style for style in styles)
        assert "default-src 'none'" in page


def test_headings_labels_and_landmarks(wires: dict[str, Wire], swept: Path) -> None:
    for page in pages(wires, swept):
        structure = Structure(page)
        levels = [int(tag[1]) for tag, _ in structure.found if re.fullmatch("h[1-6]", tag)]
        assert levels.count(1) == 1
        assert levels[0] == 1
        assert all(later <= earlier + 1 for earlier, later in pairwise(levels))
        names = [a["id"] for _, a in structure.found if "id" in a]
        assert len(names) == len(set(names))
        labelled = {a.get("for") for a in structure.of("label")}
        assert structure.of("input")
        assert all(a.get("id") in labelled or a.get("aria-label") for a in structure.of("input"))
        assert all(a.get("alt") for a in structure.of("img"))
        assert all((a["href"] or "")[1:] in names for a in structure.of("a"))
        assert [len(structure.of(tag)) for tag in ("main", "nav", "header", "footer")] == [1, 1, 1, 1]
        assert structure.of("html")[0]["lang"] == "en"
        assert any(a.get("aria-live") == "polite" for a in structure.of("p"))
        tables = structure.of("table")
        assert len(structure.of("caption")) == len(tables) > 2
        assert len(structure.of("figcaption")) == len(structure.of("figure")) > 3


def test_order_is_that_of_the_questions(wires: dict[str, Wire]) -> None:
    page = wires["tables"].page.read_text(encoding="utf-8")
    order = [a["id"] for a in Structure(page).of("section")]
    assert order == [
        "verdict",
        "section",
        "levels",
        "dispersion",
        "measured",
        "sensitivities",
        "materials",
        "not-modelled",
        "warnings",
        "accuracy",
        "input",
    ]


def test_the_page_says_what_its_folder_says(wires: dict[str, Wire]) -> None:
    import html

    wire = wires["tables"]
    page = html.unescape(wire.page.read_text(encoding="utf-8"))
    found = json.loads((wire.folder / "result.json").read_text(encoding="utf-8"))
    assert (wire.folder / "input.toml").read_text(encoding="utf-8").strip() in page
    assert "wiresolve solve input.toml" in page
    assert found["input_digest"] in page
    for value in found["materials"]:
        # What one publication says of several values stands below it once.
        for part in value["source"].split("; ", 1):
            assert part in page
    for warning in found["warnings"]:
        assert warning["code"] in page
        assert warning["remedy"] in page
    for missing in found["not_modelled"]:
        assert missing[1:] in page
    assert "transmission 0.9, 0.7" in page
    assert "800 ohm" in page


def test_texts_cannot_break_the_page(browser: Any, tmp_path: Path) -> None:
    hostile = (
        """</script><script>document.title = 'broken'</script><img src=x onerror="document.title='broken'"> & 'it'"""
    )
    text = WIRES["parabolic"].replace('"Round wire"', json.dumps(hostile)).replace('"invented"', json.dumps(hostile))
    source = tmp_path / "hostile.toml"
    source.write_text(text.replace("subbands = 8", "subbands = 3"), encoding="utf-8")
    folder = writing.write(solve(wirefile.read(source)), tmp_path / "hostile", figures=False)
    page = opened(browser, report.write_report(folder, tmp_path / "elsewhere.html"))
    assert page.execute_script("return document.querySelector('h1').textContent") == hostile
    assert page.title == f"{hostile}: Wire report"
    assert page.execute_script("return document.querySelectorAll('img, script').length") == 4
    sources = page.execute_script("return [...document.querySelectorAll('.sources li')].map((s) => s.textContent)")
    assert any(hostile in source for source in sources)
    assert page.execute_script("return Number.isFinite(window.wiresolveReport.model.lineDensity(0.1, 77))")


def test_figures_of_the_folder_are_kept_apart_from_the_page(wires: dict[str, Wire], tmp_path: Path) -> None:
    import base64

    folder = tmp_path / "drawn"
    shutil.copytree(wires["parabolic"].folder, folder)
    (folder / "figures").mkdir()
    drawn = b'<svg xmlns="http://www.w3.org/2000/svg"><script>document.title = "broken"</script></svg>'
    for name in ("modes", "levels"):
        (folder / "figures" / f"{name}.svg").write_bytes(drawn)
    page = report.html(folder)
    structure = Structure(page)
    assert "modes" in [a["id"] for a in structure.of("section")]
    pictures = [(a["src"] or "").removeprefix("data:image/svg+xml;base64,") for a in structure.of("img")]
    assert [base64.b64decode(picture) for picture in pictures] == [drawn, drawn]
    # readers without scripts get the folder's figure in place of the one that is drawn for them
    assert "<noscript><img" in page


def test_a_spectrum_survives_as_plain_data(wires: dict[str, Wire]) -> None:
    for wire in wires.values():
        spectrum = wire.result.spectrum
        again = spectrum_of_plain(json.loads(json.dumps(plain(spectrum), allow_nan=False)))
        fermi = np.linspace(wire.fermi_eV(-0.1), wire.fermi_eV(1.1), 5)
        for kelvin in (0.0, 77.0):
            before, after = (statistics.line_density(s, fermi, kelvin) for s in (spectrum, again))
            assert after.tolist() == before.tolist()


def test_a_spectrum_without_masses_survives(tmp_path: Path) -> None:
    # Where E(k) starts linearly there is no mass, and the band is its table.
    k = np.linspace(0, 0.4, 9)
    one = Spectrum([0.1], [1e-6], [np.nan], [2], [1], 1, k, [0.1 + 0.3 * k + 0.5 * k**2])  # type: ignore[arg-type,list-item]
    again = spectrum_of_plain(json.loads(json.dumps(plain(one), allow_nan=False)))
    assert statistics.line_density(again, 0.2, 50.0) == statistics.line_density(one, 0.2, 50.0)


def test_a_folder_of_an_older_version_has_no_sliders(browser: Any, wires: dict[str, Wire], tmp_path: Path) -> None:
    folder = tmp_path / "older"
    shutil.copytree(wires["valleys"].folder, folder)
    found = json.loads((folder / "result.json").read_text(encoding="utf-8"))
    del found["spectrum"]
    (folder / "result.json").write_text(json.dumps(found), encoding="utf-8")
    page = opened(browser, report.write_report(folder))
    assert page.execute_script("return document.querySelectorAll('input').length") == 0
    assert page.execute_script("return document.querySelectorAll('#draw-ladder svg').length") == 1


def test_other_folders_are_refused(tmp_path: Path, wires: dict[str, Wire]) -> None:
    with pytest.raises(InputError, match="holds no result"):
        report.html(tmp_path)
    folder = tmp_path / "cut"
    shutil.copytree(wires["parabolic"].folder, folder)
    for content in ('{"schema": "wiresolve-result-1"', "[]", "null", '{"versions": null}'):
        (folder / "result.json").write_text(content, encoding="utf-8")
        with pytest.raises(InputError, match="cannot be used"):
            report.html(folder)


def test_the_input_beside_a_result_must_be_its_own(tmp_path: Path, wires: dict[str, Wire]) -> None:
    folder = tmp_path / "changed"
    shutil.copytree(wires["parabolic"].folder, folder)
    written = (folder / "input.toml").read_text(encoding="utf-8")
    (folder / "input.toml").write_text(written.replace(f'"{2 * RADIUS_NM} nm"', '"31 nm"'), encoding="utf-8")
    assert (folder / "input.toml").read_text(encoding="utf-8") != written
    with pytest.raises(InputError, match="is not the input of the result beside it"):
        report.html(folder)


def test_a_fermi_level_far_away_does_not_squeeze_the_steps(tmp_path: Path, wires: dict[str, Wire]) -> None:
    source = wires["parabolic"].result
    carriers = replace(source.problem.carriers, fermi_level_eV=-5.0)
    far = replace(source, problem=replace(source.problem, carriers=carriers))
    page = report.html(writing.write(far, tmp_path / "far", figures=False))
    low, high = json.loads(re.search(r'"fermiRange_eV":(\[[^]]*\])', page).group(1))  # type: ignore[union-attr]
    assert source.energies_eV[0] - 0.1 < low < high < source.energies_eV[-1] + 0.1


def test_measured_points_are_on_the_page(browser: Any, wires: dict[str, Wire], tmp_path: Path) -> None:
    """They are kept in the folder, so that the page can be made from it alone, and drawn where they lie in view."""
    result = wires["parabolic"].result
    first = result.energies_eV[0]
    points = Measured("fermi_level_eV", np.array([first - 1e-3, first + 1e-3, first + 5.0]), np.array([0.1, 0.9, 99.0]))
    folder = writing.write(result, tmp_path / "out", figures=False, report=True, measured=points)
    opened(browser, folder / "report.html")
    circles = "[...document.querySelectorAll('#draw-staircase g[fill=none] circle')].map((c) => +c.getAttribute('cx'))"
    drawn = computed(browser, circles)
    assert len(drawn) == 2 and drawn[0] < drawn[1]
    assert "Circles: 2 of 3 measured points in view" in (folder / "report.html").read_text(encoding="utf-8")
    said = "document.querySelector('#draw-staircase svg').getAttribute('aria-label')"
    assert "2 of 3 measured points in view" in computed(browser, said)


def test_shares_are_the_same_in_number_bar_and_verdict(browser: Any, wires: dict[str, Wire]) -> None:
    page = opened(browser, wires["growing"].page)
    tile = page.execute_script("return document.querySelector('#says-first').firstChild.textContent")
    bar = page.execute_script(
        "return [...document.querySelectorAll('#draw-occupation text')].map((t) => t.textContent)"
        ".find((t) => t.endsWith('%'))"
    )
    assert bar.endswith(f", {tile}")
    share = computed(page, "model.bySubband(data.wire.start.fermi_eV, data.wire.start.kelvin)[0]")
    share /= computed(page, "model.lineDensity(data.wire.start.fermi_eV, data.wire.start.kelvin)")
    assert float(tile.removesuffix(" %")) == pytest.approx(100 * share - 0.05, abs=0.05 + 1e-9)
    found = json.loads((wires["growing"].folder / "result.json").read_text(encoding="utf-8"))
    contrast = found["verdict"]["steps"][-1]["levels"][0]["contrast"]
    words = f"{math.floor(1000 * contrast) / 10:.1f} %"
    assert f"contrast {words}" in found["verdict"]["text"] or contrast > 0.999
    assert f", {words}<" in wires["growing"].page.read_text(encoding="utf-8")


def test_levels_of_a_gate_curve_are_those_of_its_file(browser: Any, swept: Path) -> None:
    page = opened(browser, swept / report.REPORT)
    found = json.loads((swept / "gate_curve.json").read_text(encoding="utf-8"))
    listed = sorted({level for point in found["points"] for level in point["level"]})
    rows = page.execute_script(
        "return [...document.querySelectorAll('#numbers-occupation tbody th')].map((t) => +t.textContent)"
    )
    assert rows == listed
    # Each level is numbered once, however many subbands it has.
    numbers = page.execute_script(
        "return [...document.querySelectorAll('#draw-gate-levels svg > g[text-anchor=start] text')]"
        ".map((t) => t.textContent)"
    )
    assert sorted(int(n) for n in numbers if n.isdigit()) == listed


def test_no_text_of_a_figure_is_cut(browser: Any, wires: dict[str, Wire], swept: Path) -> None:
    cut = """return [...document.querySelectorAll('.canvas svg')].flatMap((svg) => {
        const frame = svg.getBoundingClientRect();
        return [...svg.querySelectorAll('text')].filter((text) => {
            const box = text.getBoundingClientRect();
            return box.width > 0 && (box.left < frame.left - 1 || box.right > frame.right + 1
                || box.top < frame.top - 1 || box.bottom > frame.bottom + 1);
        }).map((text) => svg.parentNode.id + ': ' + text.textContent);
    });"""
    for path in (wires["parabolic"].page, wires["tables"].page, swept / report.REPORT):
        for width in (380, 1300):
            assert opened(browser, path, width).execute_script(cut) == []
