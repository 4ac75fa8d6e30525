/* Figures that follow the sliders of a wire: density of states, staircase, occupation; and the sliders themselves. */
const now = {}; // what the sliders stand at, and what follows from it

function drawBins(width, { edges, values, filled, singular, level, label, top, domain }) {
  const bars = values.map((v, n) => ({ a: edges[n], b: edges[n + 1], v: v / 1e3, f: filled[n] / 1e3 }));
  const points = (key) =>
    bars.flatMap((b) => [
      [meV(b.a), b[key]],
      [meV(b.b), b[key]],
    ]);
  const inside = (energy) => energy >= domain[0] && energy <= domain[1];
  return plot(width, {
    height: 260,
    marginRight: RIGHT,
    x: { domain: domain.map(meV), label, ...axisText, ticks: width < 500 ? 5 : 9, tickFormat: (x) => minus(String(x)) },
    y: {
      domain: [0, top],
      label: "States (1/(meV nm))",
      ...axisText,
      ticks: 5,
      tickFormat: (x) => String(+x.toPrecision(3)),
    },
    marks: [
      Plot.gridY({ stroke: "var(--grid)", strokeOpacity: 1, ticks: 5 }),
      Plot.areaY(points("v"), { x: "0", y1: 0, y2: "1", fill: "var(--accent)", fillOpacity: 0.16, clip: true }),
      Plot.areaY(points("f"), { x: "0", y1: 0, y2: "1", fill: "var(--accent)", fillOpacity: 0.75, clip: true }),
      Plot.lineY(points("v"), { x: "0", y: "1", stroke: "var(--accent)", strokeWidth: 1, clip: true }),
      Plot.dot(singular.filter(inside), {
        x: meV,
        frameAnchor: "top",
        symbol: "triangle2",
        fill: "currentColor",
        r: 3,
        dy: -5,
      }),
      Plot.ruleX([meV(level)], { stroke: "currentColor", strokeDasharray: "5 3", strokeWidth: 1.5, clip: true }),
      Plot.ruleY([0], frame),
    ],
  });
}

function drawOccupation(width, rows) {
  fillOccupation(rows);
  const shown = rows.slice(0, 10),
    most = Math.max(
      1e-30,
      d3.max(shown, (r) => r.density),
    );
  const svg = plot(width, {
    height: 68 + 21 * shown.length,
    marginRight: 150,
    x: {
      domain: [0, most > 1e-12 ? most : 1],
      label: "Carriers (1/nm)",
      ...axisText,
      ticks: width < 500 ? 2 : 5,
      tickFormat: (x) => (x === 0 ? "0" : Math.abs(x) < 1e-3 ? minus(x.toExponential(0)) : String(+x.toPrecision(3))),
    },
    y: { type: "band", domain: shown.map((r) => r.level), label: "Level", ...axisText, padding: 0.22 },
    marks: [
      Plot.barX(shown, { x: "density", y: "level", fill: (r) => colour(r.level - 1) }),
      Plot.text(shown, {
        x: "density",
        y: "level",
        text: (r) =>
          r.share < 5e-7 || r.density < 1e-15
            ? "none"
            : `${digits(r.density, 3)}, ${r.share < 1e-3 ? "below 0.1" : percent(r.share)} %`,
        dx: 5,
        textAnchor: "start",
      }),
      Plot.ruleX([0], { stroke: "currentColor" }),
    ],
  });
  return {
    svg,
    says: shown
      .map((r) => `level ${r.level}: ${digits(r.density, 3)} per nm, ${percent(r.share)} percent`)
      .join("; "),
  };
}

/* Listed levels only, in order; a row without one (`null`) is beyond them. */
const byLevel = (densities, levels, total) =>
  d3
    .rollups(
      d3.range(levels.length).filter((n) => levels[n] !== null),
      (own) => d3.sum(own, (n) => densities[n]),
      (n) => levels[n],
    )
    .map(([level, density]) => ({ level, density, share: total > 0 ? density / total : 0 }))
    .sort((a, b) => a.level - b.level);
/* A tenth of a percent, cut as in the verdict: 94.96 % must not read as 95 %. */
const percent = (share, digits = 1) => fixed(Math.floor(share * 10 ** (2 + digits) * (1 + 1e-12)) / 10 ** digits, digits);

/* The table of the figure, for readers who want numbers. */
function fillOccupation(rows) {
  const body = $("numbers-occupation").tBodies[0];
  body.replaceChildren(
    ...rows.map((row) => {
      const line = document.createElement("tr"),
        head = document.createElement("th");
      head.scope = "row";
      head.textContent = row.level;
      line.append(head);
      for (const text of [digits(row.density), percent(row.share, 2)]) line.insertCell().textContent = text;
      return line;
    }),
  );
}

const siemens = (G) => {
  const micro = (1e6 * G) / resistanceQuantum;
  return `${digits(micro, 4)} µS` + (G > 1e-9 ? ` = ${digits(resistanceQuantum / G / 1e3, 4)} kΩ` : "");
};

/* `kelvin` and `fermi_eV` set what is drawn: staircase, density of states, occupation and the numbers beside them. */
function settle() {
  const { kelvin, fermi_eV } = now,
    wire = data.wire;
  const [low, high] = wire.fermiRange_eV;
  if (now.curveAt_K !== kelvin) {
    // Steps that are narrower than the even points are apart get points of their own.
    const near = [-8, -5, -3, -2, -1, 0, 1, 2, 3, 5, 8].map((n) => n * Math.max(kB * kelvin, 1e-9));
    const at = wire.listedEnergies.flatMap((e) => near.map((d) => e + d)).filter((e) => e >= low && e <= high);
    now.levels = d3.sort([...d3.range(241).map((n) => low + ((high - low) * n) / 240), ...at]);
    now.curve = model.conductance(now.levels, kelvin);
    now.curveAt_K = kelvin;
  }
  now.coldLevels ??= d3.sort(
    [low, high, ...wire.openings.energy.flatMap((e) => [e - 1e-9, e + 1e-9])].filter((e) => e >= low && e <= high),
  );
  now.cold ??= model.conductance(now.coldLevels, 0);
  [now.G] = model.conductance([fermi_eV], kelvin);
  now.densities = model.bySubband(fermi_eV, kelvin);
  now.density = d3.sum(now.densities) + model.tailDensity(fermi_eV, kelvin);
  now.filled = model.filled(fermi_eV, kelvin);
  now.rows = byLevel(now.densities.slice(0, model.listed), wire.listedLevels, now.density);
  const first = now.rows[0].share;
  say("says-conductance", `${digits(now.G)} G0`, siemens(now.G));
  say("says-density", `${digits(now.density)} per nm`, `${digits(1e7 * now.density, 3)} per cm`);
  say(
    "says-first",
    `${percent(first)} %`,
    first >= 0.95 ? "single-subband (95 % or more)" : "several levels carry",
  );
  say(
    "says-thermal",
    `${digits(meV(kB * kelvin), 3)} meV`,
    `width of the step 3.53 kT = ${digits(3.5255 * meV(kB * kelvin), 3)} meV`,
  );
  const words = `At ${kelvin} K and a Fermi level of ${+meV(fermi_eV).toPrecision(5)} meV: conductance ${digits(now.G)} G0, ${digits(now.density)} carriers per nm, ${percent(first)} % in the first level.`;
  announce(words);
  const beyond = $("says-beyond");
  if (beyond) beyond.hidden = kelvin <= wire.hottest_K;
}

/* Measured points between two ends of an axis whose unit is `unit` of the points'. */
const measuredWithin = (low, high, unit) =>
  data.measured.map(([x, G]) => [unit * x, G]).filter(([x]) => x >= low && x <= high);
const measuredSays = () => (data.measuredWords ? ` ${data.measuredWords}` : "");
const measuredTop = (low, high, unit = 1) => d3.max(measuredWithin(low, high, unit), (p) => p[1]) ?? 0;
const measuredMarks = (low, high, unit = 1) =>
  Plot.dot(measuredWithin(low, high, unit), {
    x: "0",
    y: "1",
    r: 2.2,
    stroke: "currentColor",
    strokeOpacity: 0.7,
    strokeWidth: 0.9,
  });

function drawStaircase(width) {
  const { kelvin } = now,
    wire = data.wire,
    [low, high] = wire.fermiRange_eV,
    top = 1.08 * Math.max(1, d3.max(now.cold), d3.max(now.curve), measuredTop(meV(low), meV(high), 1e3));
  const curve = now.levels.map((e, n) => [meV(e), now.curve[n]]),
    cold = now.coldLevels.map((e, n) => [meV(e), now.cold[n]]);
  const svg = plot(width, {
    height: 320,
    marginRight: RIGHT,
    x: {
      domain: [meV(low), meV(high)],
      label: wire.held ? "Fermi level, the potential kept (meV)" : "Fermi level (meV)",
      ...axisText,
      ticks: width < 500 ? 5 : 9,
      tickFormat: (x) => minus(String(x)),
    },
    y: { domain: [0, top] },
    marks: [
      ...conductanceAxes(top),
      Plot.dot(
        data.ladder.levels.map((l) => meV(l.energy_eV)).filter((e) => e >= meV(low) && e <= meV(high)),
        { x: Plot.identity, frameAnchor: "top", symbol: "triangle2", fill: "currentColor", r: 3, dy: -5 },
      ),
      measuredMarks(meV(low), meV(high), 1e3),
      Plot.line(cold, { stroke: "currentColor", strokeOpacity: 0.55, strokeWidth: 1, clip: true }),
      Plot.line(curve, { stroke: "var(--accent)", strokeWidth: 2.5, clip: true }),
      Plot.ruleY([0], frame),
    ],
  });
  const says = () =>
    `Conductance against the Fermi level at ${kelvin} K; ${digits(now.G)} G0 at ${digits(meV(now.fermi_eV), 5)} meV.` +
    ` A thin line shows T = 0.${measuredSays()}`;
  return withCursor(
    svg,
    () => [meV(now.fermi_eV), now.G],
    says,
    () => now.kelvin === kelvin,
  );
}

function say(id, value, more) {
  const place = $(id);
  if (place) place.replaceChildren(value, Object.assign(document.createElement("small"), { textContent: more }));
}
let waiting;
/* The sentence that screen readers hear once the slider rests, and that is printed. */
function announce(words) {
  clearTimeout(waiting);
  waiting = setTimeout(() => {
    $("announced").textContent = words;
  }, 350);
  $("printed").textContent = words;
}

/* A range and a number field that hold the same value. `toValue` and `toPlace` map the slider's 0 to 1000. */
function dial(name, toValue, toPlace, unit, set) {
  const slider = $(`${name}-slider`),
    field = $(`${name}-number`);
  const take = (value, from) => {
    if (!Number.isFinite(value)) return;
    if (from !== slider) slider.value = toPlace(value);
    if (from !== field) field.value = +value.toPrecision(5);
    slider.setAttribute("aria-valuetext", `${+value.toPrecision(5)} ${unit}`);
    set(value);
    if (from) redraw();
  };
  slider.addEventListener("input", () => take(toValue(Number(slider.value)), slider));
  field.addEventListener("input", () => {
    const [low, high] = [Number(field.min), Number(field.max)],
      value = field.valueAsNumber;
    if (value >= low && value <= high) take(value, field);
  });
  for (const button of document.querySelectorAll(`button[data-${name}]`)) {
    button.addEventListener("click", () => take(Number(button.dataset[name]), button));
  }
  return take;
}

let settleAll = () => {};
/* Everything that follows the sliders, at once; the time it took is kept for whoever measures. */
function redraw() {
  const begun = performance.now();
  settleAll();
  for (const one of figures) {
    if (!one.live || !one.width) continue;
    if (one.drawn.move && one.drawn.holds()) {
      one.drawn.move();
      tell(one);
    } else drawOne(one, one.width);
  }
  window.wiresolveReport.redraw_ms = performance.now() - begun;
}

function startWire() {
  const { fermiRange_eV, kelvinRange, start } = data.wire,
    [cold, hot] = kelvinRange,
    [low, high] = fermiRange_eV.map(meV);
  const kelvinAt = (place) => (place <= 0 ? 0 : +(cold * (hot / cold) ** (place / 1000)).toPrecision(3));
  const placeOf = (kelvin) => (kelvin <= cold ? 0 : (1000 * Math.log(kelvin / cold)) / Math.log(hot / cold));
  const setKelvin = dial("kelvin", kelvinAt, placeOf, "K", (value) => {
    now.kelvin = value;
  });
  const setFermi = dial(
    "fermi",
    (place) => +(low + ((high - low) * place) / 1000).toPrecision(6),
    (value) => (1000 * (value - low)) / (high - low),
    "meV",
    (value) => {
      now.fermi_eV = value / 1e3;
    },
  );
  setKelvin(start.kelvin);
  setFermi(+meV(start.fermi_eV).toPrecision(6));
  settleAll = settle;
  settle();
  const singular = data.wire.singular_eV,
    bins = data.wire.bins,
    top = (1.1 * (d3.quantile(bins.values, 0.985) || d3.max(bins.values))) / 1e3;
  figure(
    "draw-states",
    (width) => ({
      svg: drawBins(width, {
        ...bins,
        filled: now.filled,
        singular,
        level: now.fermi_eV,
        label: data.energyAxis,
        domain: data.wire.fermiRange_eV,
        top: Math.max(top, 1e-12),
      }),
      says: `Density of states from ${digits(meV(bins.edges[0]))} to ${digits(meV(bins.edges[bins.edges.length - 1]))} meV; the part below ${digits(meV(now.fermi_eV), 5)} meV is filled at ${now.kelvin} K.`,
    }),
    true,
  );
  figure("draw-staircase", drawStaircase, true);
  figure("draw-occupation", (width) => drawOccupation(width, now.rows), true);
  // The staircase can be grasped with a pointer too.
  const box = $("draw-staircase");
  const grasp = (event) => {
    const inside = box.getBoundingClientRect(),
      part = (event.clientX - inside.left - LEFT) / (inside.width - LEFT - RIGHT);
    if (part >= 0 && part <= 1) {
      setFermi(+(low + part * (high - low)).toPrecision(5));
      redraw();
    }
  };
  box.addEventListener("pointerdown", (event) => {
    box.setPointerCapture(event.pointerId);
    grasp(event);
  });
  box.addEventListener("pointermove", (event) => {
    if (event.buttons) grasp(event);
  });
}
