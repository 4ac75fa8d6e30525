/* What all figures share, and those that stand still: levels, dispersion, sensitivities. */
const $ = (id) => document.getElementById(id);
const colour = (n) => `var(--series-${(n % 7) + 1})`;
const dashes = ["none", "6 3", "2 2.5", "7 2.5 1.5 2.5", "10 3", "1 3"];
const minus = (text) => text.replace("-", "−");
const fixed = (x, digits) => minus(x.toFixed(digits));
function digits(x, count = 4) {
  if (!Number.isFinite(x)) return "none";
  if (Math.abs(x) < 1e-15) return "0";
  x = +x.toPrecision(count); // 0.99996 is 1.000 and not 1.0000
  const size = Math.floor(Math.log10(Math.abs(x)));
  if (size < -4 || size > 5) {
    const [number, power] = x.toExponential(count - 1).split("e");
    return `${minus(number)} × 10${superscript(String(Number(power)))}`;
  }
  return fixed(x, Math.max(0, count - 1 - size));
}
const superscript = (text) => text.replace("-", "⁻").replace(/\d/g, (n) => "⁰¹²³⁴⁵⁶⁷⁸⁹"[n]);
const meV = (energy) => 1e3 * energy;

const figures = []; // {box, draw, live}
/* Draws into `<div class="canvas" id=...>` now and whenever its width, or a slider, changes. */
function figure(id, draw, live = false) {
  const box = $(id);
  if (box) figures.push({ box, draw, live, width: 0 });
}
function drawOne(one, width) {
  one.drawn = one.draw(width);
  // One picture with one text: names of marks inside say nothing to a reader.
  for (const mark of one.drawn.svg.querySelectorAll("[aria-label]")) mark.removeAttribute("aria-label");
  one.drawn.svg.setAttribute("role", "img");
  one.width = width;
  one.box.replaceChildren(one.drawn.svg);
  tell(one);
}
function tell({ drawn }) {
  drawn.svg.setAttribute("aria-label", typeof drawn.says === "function" ? drawn.says() : drawn.says);
}
/* A dashed line, and a dot where `at` gives a height too, that move without the figure being drawn again. */
function withCursor(svg, at, says, holds = () => true) {
  const [x, y] = [svg.scale("x"), svg.scale("y")],
    [bottom, top] = y.range;
  const mark = (name) => svg.appendChild(document.createElementNS(svg.namespaceURI, name));
  const line = mark("line"),
    dot = at()[1] === undefined ? null : mark("circle");
  const put = (element, values) => Object.entries(values).forEach(([name, value]) => element.setAttribute(name, value));
  put(line, { class: "cursor", y1: bottom, y2: top });
  if (dot) put(dot, { class: "spot", r: 5.5 });
  const move = () => {
    const [across, up] = at();
    put(line, { x1: x.apply(across), x2: x.apply(across) });
    if (dot) put(dot, { cx: x.apply(across), cy: y.apply(up) });
  };
  move();
  return { svg, says, move, holds };
}
const LEFT = 60,
  RIGHT = 52,
  BOTTOM = 46;
const plot = (width, options) =>
  Plot.plot({
    width,
    marginLeft: LEFT,
    marginBottom: BOTTOM,
    ...options,
    x: { labelOffset: BOTTOM - 6, ...options.x }, // letters reach below their line
    style: { background: "none", color: "currentColor", fontFamily: "inherit", fontSize: "12px" },
  });
const frame = { stroke: "var(--rule)" };
const axisText = { labelArrow: "none", labelAnchor: "center" };

/* Heights in px for labels at `wanted`, at least `gap` apart, within the frame. */
function apart(wanted, gap, top, bottom) {
  const order = d3.range(wanted.length).sort((a, b) => wanted[a] - wanted[b]),
    at = wanted.slice();
  order.forEach((n, place) => {
    at[n] = Math.max(at[n], place ? at[order[place - 1]] + gap : top);
  });
  order.reverse().forEach((n, place) => {
    at[n] = Math.min(at[n], place ? at[order[place - 1]] - gap : bottom);
  });
  return at;
}

// figures that stand still
/* Levels to scale, with a ruler of one kT for each temperature. */
function drawLadder(width) {
  const { levels, temperatures } = data.ladder,
    narrow = width < 560,
    shown = levels.slice(0, narrow ? 24 : 30);
  const height = Math.min(640, Math.max(280, 21 * shown.length + 60)),
    top = 18,
    bottom = height - 26;
  const energies = levels.map((l) => meV(l.energy_eV)),
    [low, high] = d3.extent(energies);
  const rulers = temperatures.map((t) => ({ ...t, size: meV(kB * t.kelvin) }));
  const room = 0.06 * (high - low || Math.max(1, ...rulers.map((r) => r.size)));
  const end = Math.max(high, shown.length < 2 ? low + Math.max(0, ...rulers.map((r) => r.size)) : high) + room;
  const y = d3.scaleLinear([low - room, end], [bottom, top]);
  const left = narrow ? 56 : LEFT,
    pitch = narrow ? 22 : 30,
    from = left + 14 + pitch * rulers.length,
    longest = d3.max(shown, (l) => (narrow ? l.short : l.text).length);
  const to = Math.max(from + 40, Math.min(from + 0.32 * width, width - 26 - 7.7 * longest));
  const svg = d3.create("svg").attr("viewBox", `0 0 ${width} ${height}`).attr("width", width).attr("height", height);
  const text = (x, at, words, anchor = "start") =>
    svg.append("text").attr("x", x).attr("y", at).attr("dy", "0.32em").attr("text-anchor", anchor).text(words);
  for (const tick of y.ticks(6)) {
    svg
      .append("line")
      .attr("x1", left - 5)
      .attr("x2", to)
      .attr("y1", y(tick))
      .attr("y2", y(tick))
      .attr("class", "grid");
    text(left - 9, y(tick), minus(String(tick)), "end");
  }
  svg
    .append("text")
    .attr("transform", `translate(11,${(top + bottom) / 2}) rotate(-90)`)
    .attr("text-anchor", "middle")
    .text(data.energyAxis);
  rulers.forEach((ruler, n) => {
    const x = left + 10 + pitch * n,
      cut = low + ruler.size > end,
      head = y(Math.min(low + ruler.size, end));
    svg
      .append("line")
      .attr("x1", x)
      .attr("x2", x)
      .attr("y1", y(low))
      .attr("y2", head)
      .attr("stroke", colour(n + 1))
      .attr("stroke-width", 5);
    if (cut)
      svg
        .append("path")
        .attr("d", `M${x - 6},${head + 7}L${x},${head - 3}L${x + 6},${head + 7}Z`)
        .attr("fill", colour(n + 1));
    svg
      .append("text")
      .attr("transform", `translate(${x + 12},${y(low) - 2}) rotate(-90)`)
      .attr("class", "small")
      .text(`kT ${ruler.kelvin} K`);
  });
  const marked = [];
  if (data.ladder.fermi_eV !== null) {
    const at = y(meV(data.ladder.fermi_eV));
    if (at > top - 10 && at < bottom + 10) {
      svg
        .append("line")
        .attr("x1", left)
        .attr("x2", to + 3)
        .attr("y1", at)
        .attr("y2", at)
        .attr("class", "cursor");
      marked.push({ at, text: "Fermi level" });
    }
  }
  shown.forEach((l) => marked.push({ at: y(meV(l.energy_eV)), text: narrow ? l.short : l.text }));
  const places = apart(
    marked.map((m) => m.at),
    17,
    top,
    bottom,
  );
  marked.forEach((one, n) => {
    svg
      .append("path")
      .attr("d", `M${to + 3},${one.at}L${to + 16},${places[n]}`)
      .attr("class", "leader");
    text(to + 20, places[n], one.text);
  });
  levels.forEach((level) => {
    const count = Math.min(level.entries, 6),
      gap = count > 1 ? 5 : 0,
      wide = (to - from - gap * (count - 1)) / count;
    for (let k = 0; k < count; k++) {
      const x = from + k * (wide + gap),
        at = y(meV(level.energy_eV));
      const line = svg
        .append("line")
        .attr("x1", x)
        .attr("x2", x + wide)
        .attr("y1", at)
        .attr("y2", at)
        .attr("stroke", colour(level.group))
        .attr("stroke-width", 2.5);
      if (level.group) line.attr("stroke-dasharray", dashes[level.group % dashes.length]);
    }
  });
  const ratios = rulers.map((r) => `kT is ${digits(r.size, 3)} meV at ${r.kelvin} K`).join(", ");
  const says = `Levels from ${digits(low)} to ${digits(high)} meV: ${levels.map((l) => l.short).join("; ")}. ${ratios}.`;
  return { svg: svg.node(), says };
}

/* Spacing to the next level and error bar of each, on a logarithmic axis, against kT. */
function drawAgainstThermal(width) {
  const { levels, temperatures } = data.ladder,
    shown = levels.slice(0, 30),
    rows = [];
  shown.forEach((level, n) => {
    const next = levels[n + 1];
    if (next) rows.push({ level: level.level, kind: "spacing", value: meV(next.energy_eV - level.energy_eV) });
    if (level.bar_eV > 0) rows.push({ level: level.level, kind: "bar", value: meV(level.bar_eV) });
  });
  const rulers = temperatures.map((t, n) => ({ ...t, value: meV(kB * t.kelvin), n }));
  const all = [...rows, ...rulers].map((r) => r.value);
  const domain = [d3.min(all) / 3, d3.max(all) * 4];
  const near = (a, b) => Math.abs(Math.log(a / b) / Math.log(domain[1] / domain[0])) * width < 60;
  const row = rulers.map((r, n) => d3.sum(rulers.slice(0, n), (o) => near(o.value, r.value)) % 3);
  const above = 8 + 15 * (1 + Math.max(0, ...row)),
    height = Math.max(120, 16 * shown.length) + above + BOTTOM;
  const decade = (x) => Math.abs(Math.log10(x) - Math.round(Math.log10(x))) < 1e-9;
  const svg = plot(width, {
    height,
    marginTop: above,
    x: {
      type: "log",
      domain,
      label: "Energy (meV)",
      ticks: width < 500 ? 3 : 7,
      tickFormat: (x) =>
        decade(x) ? (x < 1e-3 ? `10${superscript(String(Math.round(Math.log10(x))))}` : String(+x.toPrecision(1))) : "",
      ...axisText,
    },
    y: { type: "band", domain: shown.map((l) => l.level).reverse(), label: "Level", ...axisText },
    marks: [
      Plot.ruleY(shown, { y: "level", stroke: "var(--grid)" }),
      Plot.ruleX(rulers, { x: "value", stroke: (r) => colour(r.n + 1), strokeWidth: 2 }),
      ...[0, 1, 2].map((n) =>
        Plot.text(
          rulers.filter((r) => row[r.n] === n),
          { x: "value", text: (r) => `kT ${r.kelvin} K`, frameAnchor: "top", lineAnchor: "bottom", dy: -2 - 15 * n },
        ),
      ),
      Plot.dot(
        rows.filter((r) => r.kind === "spacing"),
        { x: "value", y: "level", r: 4.5, fill: "currentColor" },
      ),
      Plot.tickX(
        rows.filter((r) => r.kind === "bar"),
        { x: "value", y: "level", stroke: "currentColor", strokeWidth: 2.5, inset: 1 },
      ),
    ],
  });
  const says = shown
    .slice(0, -1)
    .map((l, n) => `level ${l.level}: ${digits(meV(levels[n + 1].energy_eV - l.energy_eV), 3)} meV to the next`)
    .join("; ");
  return { svg, says: `Spacings and error bars against kT. ${says}.` };
}

function drawDispersion(width) {
  const { k, energy, level, group } = data.dispersion,
    right = 34,
    height = Math.min(460, Math.max(300, 0.55 * width));
  const lines = energy.map((row, n) => {
    const half = k.map((x, i) => [x, meV(row[i])]);
    return {
      n,
      points: [
        ...half
          .slice(k[0] === 0 ? 1 : 0)
          .reverse()
          .map(([x, e]) => [-x, e]),
        ...half,
      ],
    };
  });
  const values = lines.flatMap((l) => l.points.map((p) => p[1])),
    [low, high] = d3.extent(values);
  const room = 0.03 * (high - low),
    domain = [low - room, high + room];
  const y = d3.scaleLinear(domain, [height - BOTTOM, 20]);
  const ends = d3
    .rollups(
      lines,
      (own) => own[own.length - 1],
      (l) => level[l.n],
    )
    .map(([number, l]) => ({ number, at: l.points[l.points.length - 1] }));
  const places = apart(
    ends.map((e) => y(e.at[1])),
    13,
    20,
    height - BOTTOM,
  );
  const svg = plot(width, {
    height,
    marginRight: right,
    x: {
      label: "Wave number along the wire (1/nm)",
      ...axisText,
      ticks: width < 500 ? 5 : 9,
      tickFormat: (x) => minus(String(x)),
    },
    y: { domain, label: data.energyAxis, ...axisText, tickFormat: (x) => minus(String(x)) },
    marks: [
      Plot.gridY({ stroke: "var(--grid)", strokeOpacity: 1 }),
      ...lines.map((l) =>
        Plot.line(l.points, {
          stroke: colour(level[l.n] - 1),
          strokeWidth: 1.6,
          strokeDasharray: dashes[group[l.n] % dashes.length],
        }),
      ),
      Plot.text(
        ends.map((e, n) => ({ ...e, y: y.invert(places[n]) })),
        { x: (e) => e.at[0], y: "y", text: (e) => String(e.number), dx: 6, textAnchor: "start" },
      ),
      data.ladder.fermi_eV === null
        ? null
        : Plot.ruleY([meV(data.ladder.fermi_eV)], { stroke: "currentColor", strokeDasharray: "5 3", clip: true }),
    ],
  });
  return {
    svg,
    says: `Energy of ${lines.length} subbands against the wave number along the wire, from ${digits(low)} to ${digits(high)} meV, numbered by level.`,
  };
}

function drawSensitivities(width) {
  const { rows, levels } = data.sensitivities,
    dims = rows.map((r) => r.of),
    left = width < 560 ? 118 : 190;
  const points = rows.flatMap((r) => r.values.map((v, n) => ({ of: r.of, level: levels[n], low: v[0], high: v[1] })));
  const svg = plot(width, {
    height: 70 + 34 * dims.length,
    marginLeft: left,
    marginRight: 24,
    x: {
      label: "Motion of the level (meV for each nm)",
      ...axisText,
      nice: true,
      tickFormat: (x) => minus(String(x)),
      ticks: width < 500 ? 4 : 8,
    },
    y: {
      domain: dims,
      label: null,
      tickSize: 0,
      tickFormat: (d) => (d.length * 6.6 > left ? d.slice(0, Math.floor(left / 6.6) - 1) + "…" : d),
    },
    color: { domain: levels, range: levels.map((_, n) => colour(n)) },
    marks: [
      Plot.gridX({ stroke: "var(--grid)", strokeOpacity: 1 }),
      Plot.ruleX([0], { stroke: "currentColor" }),
      Plot.link(points, { y1: "of", y2: "of", x1: "low", x2: "high", stroke: "level", strokeWidth: 3 }),
      Plot.dot(
        points.flatMap((p) => [
          { ...p, at: p.low },
          { ...p, at: p.high },
        ]),
        { y: "of", x: "at", fill: "level", r: 5 },
      ),
      Plot.text(points, { y: "of", x: "low", text: (p) => String(p.level), dy: -12 }),
    ],
  });
  return { svg, says: `How far the first ${levels.length} levels move for each nanometre of ${dims.join(", ")}.` };
}

/* G0 on the left, microsiemens in round numbers on the right. */
function conductanceAxes(top) {
  const unit = 1e6 / resistanceQuantum,
    whole = d3.ticks(0, top, Math.min(8, Math.ceil(top)));
  return [
    Plot.gridY(whole, { stroke: "var(--grid)", strokeOpacity: 1 }),
    Plot.axisY(whole, {
      label: "Conductance (G0 = 2e²/h)",
      labelArrow: "none",
      labelAnchor: "center",
      tickFormat: (g) => String(g),
    }),
    Plot.axisY(
      d3.ticks(0, top * unit, 6).map((g) => g / unit),
      {
        anchor: "right",
        label: null,
        tickFormat: (g) => String(+(g * unit).toPrecision(4)),
      },
    ),
    Plot.text(["µS"], { frameAnchor: "top-right", textAnchor: "start", lineAnchor: "bottom", dx: 9, dy: -7 }),
  ];
}
