/* Figures of a gate curve; those of its slider go between the solved points. */
const gateAxis = (width, extra = {}) => ({
  domain: d3.extent(data.curve.voltages),
  label: data.curve.axis,
  ...axisText,
  ticks: width < 500 ? 5 : 9,
  tickFormat: (x) => minus(String(x)),
  ...extra,
});
const atVoltage = () => [now.voltage];
const failedMarks = () =>
  Plot.dot(data.curve.failed, {
    x: Plot.identity,
    frameAnchor: "bottom",
    symbol: "times",
    stroke: "currentColor",
    r: 4,
    dy: -6,
  });

function drawGateLevels(width) {
  const { lines, at, voltages, kelvin } = data.sweep,
    thermal = meV(kB * kelvin),
    height = Math.min(440, Math.max(300, 0.5 * width));
  const [low, high] = d3.extent([...lines.flatMap((l) => l.meV), -thermal, thermal]);
  const room = 0.04 * (high - low),
    y = d3.scaleLinear([low - room, high + room], [height - BOTTOM, 20]);
  // One number for a level, however many subbands it has.
  const ends = d3
    .rollups(
      lines.filter((l) => l.meV.at(-1) !== null),
      (own) => d3.mean(own, (l) => l.meV.at(-1)),
      (l) => l.level,
    )
    .map(([level, end]) => ({ level, end }));
  const places = apart(
    ends.map((e) => y(e.end)),
    13,
    20,
    height - BOTTOM,
  );
  const svg = plot(width, {
    height,
    marginRight: 34,
    x: gateAxis(width),
    y: {
      domain: y.domain(),
      label: "Energy from the Fermi level (meV)",
      ...axisText,
      tickFormat: (x) => minus(String(x)),
    },
    marks: [
      Plot.gridY({ stroke: "var(--grid)", strokeOpacity: 1 }),
      Plot.rect([0], {
        x1: voltages[0],
        x2: voltages[voltages.length - 1],
        y1: -thermal,
        y2: thermal,
        fill: "var(--accent)",
        fillOpacity: 0.18,
      }),
      Plot.ruleY([0], { stroke: "currentColor", strokeDasharray: "5 3" }),
      ...lines.map((l) =>
        Plot.line(
          at.map((v, i) => [v, l.meV[i]]),
          { stroke: colour(l.level - 1), strokeDasharray: dashes[l.group % dashes.length], strokeWidth: 1.6 },
        ),
      ),
      Plot.text(
        ends.map((e, i) => [voltages[voltages.length - 1], y.invert(places[i]), e.level]),
        { x: "0", y: "1", text: (p) => String(p[2]), dx: 6, textAnchor: "start" },
      ),
      failedMarks(),
    ],
  });
  const says = `Energies of ${lines.length} subbands against gate voltage; those below zero, the Fermi level, conduct.`;
  return withCursor(svg, atVoltage, says);
}

function drawGateStaircase(width) {
  const { points, steps } = data.curve,
    { voltages, at, conductance } = data.sweep,
    [first, last] = d3.extent(data.curve.voltages),
    top =
      1.08 *
      Math.max(
        1,
        d3.max(points, (p) => p.conductance_G0),
        d3.max(conductance),
        measuredTop(first, last),
      );
  const svg = plot(width, {
    height: 320,
    marginRight: RIGHT,
    x: gateAxis(width),
    y: { domain: [0, top] },
    marks: [
      ...conductanceAxes(top),
      Plot.dot(
        steps.filter((s) => s !== null && s >= voltages[0] && s <= voltages[voltages.length - 1]),
        { x: Plot.identity, frameAnchor: "top", symbol: "triangle2", fill: "currentColor", r: 3.5, dy: -6 },
      ),
      Plot.line(d3.zip(at, conductance), { stroke: "var(--accent)", strokeWidth: 2 }),
      measuredMarks(first, last),
      Plot.dot(points, { x: "gate_voltage_V", y: "conductance_G0", r: 3, fill: "var(--accent)" }),
      failedMarks(),
      Plot.ruleY([0], frame),
    ],
  });
  const says = () =>
    `Conductance against gate voltage; ${digits(now.G)} G0 at ${digits(now.voltage)} V.` +
    ` Dots are solved points, the line goes between them.${measuredSays()}`;
  return withCursor(svg, () => [now.voltage, now.G], says);
}

function settleGate() {
  const { voltage } = now,
    { rows } = data.sweep,
    { edges } = data.sweep.bins;
  now.G = model.conductance(voltage);
  now.densities = model.bySubband(voltage);
  now.density = d3.sum(now.densities);
  now.values = model.densityOfStates(voltage, edges);
  now.filled = filledBins({ edges, values: now.values }, 0, data.sweep.kelvin);
  now.rows = byLevel(
    now.densities,
    rows.map((r) => r.level),
    now.density,
  );
  const open = d3.sum(model.at(voltage), (s) => s.lowest < 0);
  say("says-conductance", `${digits(now.G)} G0`, siemens(now.G));
  say("says-density", `${digits(now.density)} per nm`, `${digits(1e7 * now.density, 3)} per cm`);
  say(
    "says-first",
    `${open}`,
    open === 1 ? "subband lies below the Fermi level" : "subbands lie below the Fermi level",
  );
  say("says-thermal", `${digits(meV(kB * data.sweep.kelvin), 3)} meV`, `at ${data.sweep.kelvin} K, that of this sweep`);
  announce(
    `At ${digits(voltage)} V: conductance ${digits(now.G)} G0, ${digits(now.density)} carriers per nm, ${open} ${open === 1 ? "subband" : "subbands"} below the Fermi level.`,
  );
}

/* Lines of columns of the sweep against gate voltage. */
function drawColumns(width, columns, y, height = 280) {
  const svg = plot(width, {
    height,
    marginRight: 78,
    x: gateAxis(width),
    y: { ...axisText, ...y },
    marks: [
      Plot.gridY({ stroke: "var(--grid)", strokeOpacity: 1, ticks: y.ticks }),
      ...columns.map((one, n) =>
        Plot.line(one.points, { stroke: n ? colour(n - 1) : "currentColor", strokeWidth: n ? 1.6 : 2.4, clip: true }),
      ),
      Plot.text(
        spread(
          columns
            .filter((one) => one.points.length)
            .map((one) => ({
              name: one.name,
              x: one.points[one.points.length - 1][0],
              y: one.points[one.points.length - 1][1],
            })),
          y.type === "log",
          y.domain,
          height - BOTTOM,
        ),
        { x: "x", y: "at", text: "name", dx: 6, textAnchor: "start" },
      ),
      failedMarks(),
    ],
  });
  const says = `${columns.map((one) => one.name).join(", ")} against gate voltage.`;
  return now.voltage === undefined ? { svg, says } : withCursor(svg, atVoltage, says);
}

function drawGateDensity(width) {
  const { points } = data.curve,
    lines = [{ name: "in all", points: points.map((p) => [p.gate_voltage_V, p.line_density_per_nm]) }];
  for (const level of data.curve.levels)
    lines.push({ name: `level ${level.level}`, points: points.map((p, n) => [p.gate_voltage_V, level.density[n]]) });
  const top = d3.max(lines[0].points, (p) => p[1]),
    shown = lines.filter((l, n) => !n || l.points[l.points.length - 1][1] > 0.01 * top);
  return drawColumns(width, shown, { domain: [0, 1.06 * (top || 1)], label: "Line density (1/nm)" });
}

function drawCapacitance(width) {
  const least = 1e-3 * d3.max(data.curve.points, (p) => p.capacitance_F_per_m);
  const named = [
    ["in all", "capacitance_F_per_m"],
    ["geometric", "geometric_F_per_m"],
    ["quantum", "quantum_F_per_m"],
    ["centroid", "centroid_F_per_m"],
  ];
  const lines = named.map(([name, key]) => ({
    name,
    points: data.curve.points.filter((p) => p[key] > least).map((p) => [p.gate_voltage_V, 1e9 * p[key]]),
  }));
  const whole = lines[0].points.map((p) => p[1]),
    top = d3.max(whole) || 1,
    low = d3.min(whole.filter((v) => v > 1e-3 * top)) || top / 10;
  const drawn = d3.max(lines.flatMap((l) => l.points.map((p) => p[1]))) || top;
  return drawColumns(width, lines, {
    type: "log",
    domain: [low / 2, Math.min(2 * drawn, 100 * top)],
    label: "Capacitance (nF/m)",
    ticks: 4,
    tickFormat: (v) => String(+v.toPrecision(1)),
  });
}

function drawCurrents(width, across) {
  const { transistor } = data.curve,
    gate = across === "gate";
  const lines = d3.groups(transistor, (t) => (gate ? t.drain_voltage_V : t.gate_voltage_V));
  const some = d3
    .range(Math.min(7, lines.length))
    .map((n) => lines[Math.round((n * (lines.length - 1)) / Math.max(1, Math.min(7, lines.length) - 1))]);
  const x = (t) => (gate ? t.gate_voltage_V : t.drain_voltage_V),
    values = transistor.map((t) => Math.abs(1e6 * t.current_A));
  const top = d3.max(values),
    domain = gate
      ? [Math.max(1e-12 * top, d3.min(values.filter((v) => v > 1e-12 * top)) / 2), 2 * top]
      : [0, 1.06 * top];
  const svg = plot(width, {
    height: 300,
    marginRight: 62,
    x: {
      label: gate ? data.curve.axis : "Drain voltage (V)",
      ...axisText,
      tickFormat: (v) => minus(String(v)),
      ticks: width < 500 ? 5 : 9,
      ...(gate ? {} : { domain: [0, d3.max(transistor, x)] }),
    },
    y: {
      type: gate ? "log" : "linear",
      domain,
      label: "Current (µA)",
      ...axisText,
      ticks: 6,
      tickFormat: (v) => (gate ? `10${superscript(String(Math.round(Math.log10(v))))}` : String(+v.toPrecision(3))),
    },
    marks: [
      Plot.gridY({ stroke: "var(--grid)", strokeOpacity: 1, ticks: 6 }),
      ...some.map(([, own], n) =>
        Plot.line([...(gate ? [] : [[0, 0]]), ...own.map((t) => [x(t), 1e6 * Math.abs(t.current_A)])], {
          stroke: colour(n),
          strokeWidth: 1.8,
          clip: true,
        }),
      ),
      Plot.text(
        spread(
          some.map(([value, own]) => ({
            value,
            x: x(own[own.length - 1]),
            y: 1e6 * Math.abs(own[own.length - 1].current_A),
          })),
          gate,
          domain,
          300 - BOTTOM,
        ),
        { x: "x", y: "at", text: (s) => minus(`${+s.value.toPrecision(4)} V`), dx: 5, textAnchor: "start" },
      ),
    ],
  });
  return {
    svg,
    says: gate
      ? "Current against gate voltage on a logarithmic axis, a line a drain voltage."
      : "Current against drain voltage, a line a gate voltage.",
  };
}
/* Labels at the lines' ends, moved apart. */
function spread(ends, logarithmic, domain, bottom) {
  const y = (logarithmic ? d3.scaleLog : d3.scaleLinear)(domain, [bottom, 20]);
  const wanted = ends.map((e) => Math.min(bottom, Math.max(20, y(Math.max(e.y, domain[0] || 1e-300)))));
  const places = apart(wanted, 13, 20, bottom);
  return ends.map((e, n) => ({ ...e, at: y.invert(places[n]) }));
}

function startSweep() {
  const { voltages, bins } = data.sweep,
    [low, high] = [voltages[0], voltages[voltages.length - 1]];
  const setVoltage = dial(
    "voltage",
    (place) => +(low + ((high - low) * place) / 1000).toPrecision(5),
    (value) => (1000 * (value - low)) / (high - low),
    "V",
    (value) => {
      now.voltage = value;
    },
  );
  setVoltage(data.sweep.start_V);
  settleAll = settleGate;
  settleGate();
  const top = (1.1 * d3.quantile(model.densityOfStates(high, bins.edges), 0.97)) / 1e3;
  figure("draw-gate-levels", drawGateLevels, true);
  figure("draw-gate-staircase", drawGateStaircase, true);
  figure(
    "draw-states",
    (width) => ({
      svg: drawBins(width, {
        edges: bins.edges,
        values: now.values,
        filled: now.filled,
        singular: [],
        level: 0,
        label: "Energy from the Fermi level (meV)",
        domain: d3.extent(bins.edges),
        top: Math.max(top, 1e-12),
      }),
      says: `Density of states at ${digits(now.voltage)} V, filled below the Fermi level.`,
    }),
    true,
  );
  figure("draw-occupation", (width) => drawOccupation(width, now.rows), true);
}
