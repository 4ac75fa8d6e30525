/* The sums behind the sliders: the formulas of wiresolve/physics (fermi, tabulated_band, statistics, conductance,
   rounded), written again so that the page needs nothing but itself. Energies in eV, lengths in nm. */
const data = JSON.parse(document.getElementById("report-data").textContent);
const { kB, c, resistanceQuantum } = data.constants; // eV/K, hbar^2/2m0 in eV nm^2, ohm

// Fermi functions
const fermi = (x) => (x > 0 ? 1 / (1 + Math.exp(-x)) : Math.exp(x) / (1 + Math.exp(x)));
const softplus = (x) => Math.max(x, 0) + Math.log1p(Math.exp(-Math.abs(x)));

/* Coefficients of z, z^2, ... of F_j, z = exp(eta) <= 1, with the weights of Cohen, Rodriguez Villegas and Zagier. */
function seriesCoefficients(order, count = 23) {
  const whole = ((3 + Math.sqrt(8)) ** count + (3 - Math.sqrt(8)) ** count) / 2;
  let term = -1,
    rest = -whole;
  return Array.from({ length: count }, (_, n) => {
    rest = term - rest;
    term *= ((n + count) * (n - count)) / ((n + 0.5) * (n + 1));
    return rest / whole / (n + 1) ** (order + 1);
  });
}
const polynomial = (coefficients, x) => coefficients.reduceRight((total, value) => total * x + value, 0);
const thin = seriesCoefficients(-0.5);
const sommerfeld = [2 / Math.sqrt(Math.PI)];
for (let m = 1, reciprocal = sommerfeld[0]; m < 11; m++) {
  for (const x of [2.5 - 2 * m, 1.5 - 2 * m]) reciprocal *= x; // 1/Gamma(x) = x/Gamma(x + 1)
  sommerfeld.push(2 * seriesCoefficients(2 * m - 1).reduce((a, b) => a + b) * reciprocal);
}
const SHIFT = 8,
  FAR = 2 * Math.PI * SHIFT;

/* F_(-1/2), normalised by 1/Gamma(1/2). */
function fermiIntegral(eta) {
  if (eta <= -38) return Math.exp(eta);
  if (eta <= 0) {
    const z = Math.exp(eta);
    return z * polynomial(thin, z);
  }
  if (eta > FAR) return Math.sqrt(eta) * polynomial(sommerfeld, eta ** -2);
  let residues = 0;
  for (let k = 0; k < SHIFT; k++) {
    const height = Math.PI * (2 * k + 1),
      modulus = Math.hypot(eta, height);
    residues -= height / (2 * Math.sqrt((modulus + eta) / 2) * modulus);
  }
  // sqrt(w) times the series in w^-2, w = eta + i FAR
  const modulus = Math.hypot(eta, FAR),
    root = Math.sqrt((modulus + eta) / 2),
    over = FAR / (2 * root);
  const size = 1 / modulus ** 4,
    x = (eta * eta - FAR * FAR) * size,
    y = -2 * eta * FAR * size;
  let real = 0,
    imaginary = 0;
  for (const value of sommerfeld.slice().reverse()) {
    [real, imaginary] = [real * x - imaginary * y + value, real * y + imaginary * x];
  }
  return root * real - over * imaginary + 2 * Math.sqrt(Math.PI) * residues;
}

// bands E(k) as monotone pieces
const lastBelow = (edges, x) => Math.max(0, Math.min(d3.bisectRight(edges, x) - 1, edges.length - 2));

/* e (1 + alpha e) = value + hbar^2 k^2 / 2m, e from `edge`; the mass is that at the minimum. */
function growingBand({ lowest, mass, edge, alpha }) {
  const value = (energy) => edge + (energy - edge) * (1 + alpha * (energy - edge));
  const bottom = value(lowest),
    stiffness = (c / mass) * (1 + 2 * alpha * (lowest - edge));
  const energy = (k) => {
    const above = bottom + stiffness * k * k - edge;
    return edge + (2 * above) / (1 + Math.sqrt(Math.max(1 + 4 * alpha * above, 0)));
  };
  const wave = (at) => Math.sqrt(Math.max(value(at) - bottom, 0) / stiffness);
  return { lowest, pieces: [{ low: lowest, high: Infinity, atLow: 0, energy, wave }] };
}

/* A cubic spline, then a parabola. */
function tableBand({ lowest, knots, coefficients, beyond, pieces }) {
  const [c3, c2, c1, c0] = coefficients;
  const energy = (k) => {
    const n = lastBelow(knots, k),
      t = k - knots[n];
    return ((c3[n] * t + c2[n]) * t + c1[n]) * t + c0[n];
  };
  const made = pieces.map(({ start, end, low, high, rising }) => {
    if (end === null) {
      const outer = (k) => low + beyond * (k * k - start * start);
      const wave = (at) => Math.sqrt(start * start + Math.max(at - low, 0) / beyond);
      return { low, high: Infinity, atLow: start, energy: outer, wave };
    }
    const inside = [start, ...knots.filter((k) => k > start && k < end), end];
    if (!rising) inside.reverse();
    const energies = inside.map(energy);
    const wave = (at) => {
      if (at <= energies[0]) return inside[0];
      if (at >= energies[energies.length - 1]) return inside[inside.length - 1];
      const n = lastBelow(energies, at);
      let below = inside[n],
        above = inside[n + 1],
        k = (below + above) / 2; // E(below) <= at <= E(above)
      const cell = lastBelow(knots, k),
        left = knots[cell];
      for (let pass = 0; pass < 60; pass++) {
        const t = k - left,
          miss = ((c3[cell] * t + c2[cell]) * t + c1[cell]) * t + c0[cell] - at;
        if (miss < 0) below = k;
        else above = k;
        let next = k - miss / ((3 * c3[cell] * t + 2 * c2[cell]) * t + c1[cell]);
        if (!(next > Math.min(below, above) && next < Math.max(below, above))) next = (below + above) / 2;
        const settled = Math.abs(next - k) <= 1e-14 * end;
        k = next;
        if (settled) break;
      }
      return k;
    };
    return { low, high, atLow: rising ? start : end, energy, wave };
  });
  return { lowest, pieces: made };
}

const gauss = [
  [0.1488743389816312, 0.2955242247147529],
  [0.4333953941292472, 0.2692667193099963],
  [0.6794095682990244, 0.2190863625159821],
  [0.8650633666889845, 0.1494513491505806],
  [0.9739065285171717, 0.0666713443086881],
].flatMap(([x, w]) => [
  [-x, w],
  [x, w],
]);
const REACH = 32,
  PANELS = 14;

/* Integral of the Fermi function over k >= 0: the full part counted, the window around E_F by Gauss panels. */
function occupiedLength(band, level, kT) {
  let total = 0;
  for (const piece of band.pieces) {
    const low = Math.min(Math.max(level - REACH * kT, piece.low), piece.high);
    const high = Math.min(Math.max(level, band.lowest) + REACH * kT, piece.high);
    if (high <= piece.low) continue;
    const full = piece.wave(low);
    total += Math.abs(full - piece.atLow);
    if (!(kT > 0 && high > low)) continue;
    const half = (piece.wave(high) - full) / PANELS / 2;
    let window = 0;
    for (let n = 0; n < PANELS; n++) {
      const middle = full + (2 * n + 1) * half;
      for (const [x, w] of gauss) window += w * fermi((level - piece.energy(middle + half * x)) / kT);
    }
    total += Math.abs(half) * window;
  }
  return total;
}

/* Carriers per nm of one subband, as a function of Fermi level and kT. */
function subbandDensity(raw) {
  const g = raw.degeneracy;
  if (raw.kind === "parabola") {
    return (level, kT) => {
      const distance = level - raw.lowest;
      if (kT === 0 || distance / kT > 1e8) return (g / Math.PI) * Math.sqrt((Math.max(distance, 0) * raw.mass) / c);
      return (g / 2) * Math.sqrt((raw.mass * kT) / (Math.PI * c)) * fermiIntegral(distance / kT);
    };
  }
  const band = raw.kind === "growing" ? growingBand(raw) : tableBand(raw);
  return (level, kT) => (g / Math.PI) * occupiedLength(band, level, kT);
}

// steps and ramps rounded by two widths
/* Rounded by one width: Fermi functions. By two, kT and that of a saddle: a table of Hermite pieces, good to 1e-7. */
function roundedBy(first, second) {
  const narrow = Math.min(first, second),
    wide = Math.max(first, second);
  if (wide === 0) {
    return { step: (d) => (d > 0 ? 1 : d < 0 ? 0 : 0.5), ramp: (d) => Math.max(d, 0) };
  }
  if (narrow / wide < 1e-18) return { step: (d) => fermi(d / wide), ramp: (d) => wide * softplus(d / wide) };
  const count = 800,
    deepest = 60,
    h = (deepest / count) * wide,
    spacing = 0.75,
    slack = 1 - narrow / wide;
  const density = (t) => {
    const e = Math.exp(-Math.abs(t));
    return e / (1 + e) ** 2;
  };
  const rows = Array.from({ length: count + 1 }, (_, n) => {
    const depth = (count - n) * h,
      flat = Math.min(depth / narrow, slack > 0 ? 42 / slack : Infinity, 760);
    let step = 0,
      slope = 0,
      ramp = 0;
    for (let i = -Math.ceil(32 / spacing); i <= Math.ceil((flat + 32) / spacing); i++) {
      const t = i * spacing,
        weight = spacing * density(t),
        x = (narrow * t - depth) / wide;
      step += weight * fermi(x);
      slope += (weight * density(x)) / wide;
      ramp += weight * wide * softplus(x);
    }
    return [step, slope, ramp];
  });
  const between = (d, value, slope) => {
    const place = (deepest * wide + d) / h,
      n = Math.min(Math.floor(place), count - 1),
      t = place - n;
    if (n < 0) return 0;
    const [a, b] = [rows[n], rows[n + 1]],
      left = h * a[slope],
      right = h * b[slope],
      rise = b[value] - a[value];
    return a[value] + t * (left + t * (3 * rise - 2 * left - right + t * (left + right - 2 * rise)));
  };
  return {
    step: (d) => (d > 0 ? 1 - between(-d, 0, 1) : between(d, 0, 1)),
    ramp: (d) => Math.max(d, 0) + between(-Math.abs(d), 2, 0),
  };
}

const inSeries = (G, ohm) => G / (1 + (G * ohm) / resistanceQuantum);

const rounded = new Map(); // by widths: the last few of `roundedBy`
/* Conductance in G0 at Fermi levels: openings [energy], [modes x what is transmitted], ramps likewise. */
function conductance({ openings, through }, levels, kT) {
  const widths = `${kT} ${through.width}`;
  if (!rounded.has(widths)) {
    if (rounded.size > 20) rounded.clear();
    rounded.set(widths, roundedBy(kT, through.width));
  }
  const { step, ramp } = rounded.get(widths),
    sharpest = 45 * Math.max(kT, through.width);
  return levels.map((level) => {
    let total = 0,
      grown = 0;
    openings.energy.forEach((energy, n) => {
      total += openings.modes[n] * step(level - energy);
    });
    openings.rampEnergy.forEach((energy, n) => {
      if (level - energy > -sharpest) grown += openings.rampModes[n] * ramp(level - energy);
    });
    return inSeries((total + Math.max(grown, 0)) / 2, through.resistance);
  });
}

// a solved wire
function wireOf({ states, listed, openings, through, tail, bins }) {
  const densities = states.map(subbandDensity);
  const tailDensity = (level, kT) => {
    let total = 0;
    tail.energy.forEach((energy, n) => {
      const d = level - energy;
      if (kT === 0 || Math.abs(d) > 700 * kT) total += tail.change[n] * Math.max(d, 0);
      else total += tail.change[n] * kT * softplus(d / kT);
    });
    return Math.max(total, 0);
  };
  return {
    conductance: (levels, kelvin) => conductance({ openings, through }, levels, kB * kelvin),
    bySubband: (level, kelvin) => densities.map((density) => density(level, kB * kelvin)),
    tailDensity: (level, kelvin) => tailDensity(level, kB * kelvin),
    lineDensity: (level, kelvin) =>
      d3.sum(densities, (density) => density(level, kB * kelvin)) + tailDensity(level, kB * kelvin),
    densityOfStates: (edges) => binned(densities, edges),
    filled: (level, kelvin) => filledBins(bins, level, kelvin),
    listed,
  };
}

/* Exact averages over bins: differences of the numbers of states below their edges. */
function binned(densities, edges) {
  const below = edges.map((edge) => d3.sum(densities, (density) => density(edge, 0)));
  return d3.pairs(below).map(([a, b], n) => (b - a) / (edges[n + 1] - edges[n]));
}
/* The occupied part of each bin: its average times the Fermi function in its middle. */
function filledBins({ edges, values }, level, kelvin) {
  return values.map((value, n) => {
    const distance = level - (edges[n] + edges[n + 1]) / 2;
    const part = kelvin > 0 ? fermi(distance / (kB * kelvin)) : distance > 0 ? 1 : distance < 0 ? 0 : 0.5;
    return value * part;
  });
}

// a swept gate
/* Rows of the sweep at any voltage of it: energies on cubic Hermite pieces through points, openings and couplings,
   their slopes held to three times that of the straight line, so that nothing overshoots; masses on straight lines. */
function sweepOf({ voltages, rows, through, kelvin }) {
  const hermite = ({ nodes, energy, coupling }, voltage) => {
    const n = lastBelow(nodes, voltage),
      width = nodes[n + 1] - nodes[n],
      t = (voltage - nodes[n]) / width;
    const rise = energy[n + 1] - energy[n];
    const held = (slope) => (rise === 0 ? 0 : rise * Math.min(Math.max((slope * width) / rise, 0), 3));
    const left = held(-coupling[n]),
      right = held(-coupling[n + 1]);
    return energy[n] + t * (left + t * (3 * rise - 2 * left - right + t * (left + right - 2 * rise)));
  };
  const at = (voltage) => {
    const n = lastBelow(voltages, voltage),
      t = (voltage - voltages[n]) / (voltages[n + 1] - voltages[n]);
    const straight = (list) => list[n] + t * (list[n + 1] - list[n]);
    return rows.map((row) => {
      const energy = hermite(row, voltage),
        degeneracy = row.degeneracy[t < 0.5 ? n : n + 1];
      const mass = straight(row.mass),
        alpha = straight(row.alpha);
      return { kind: alpha > 0 ? "growing" : "parabola", lowest: energy, edge: energy, mass, alpha, degeneracy };
    });
  };
  const openingsOf = (states) => {
    const order = d3.sort(states, (s) => s.lowest);
    const part = (n) => through.parts[Math.min(n, through.parts.length - 1)];
    const modes = order.map((s, n) => s.degeneracy * part(n));
    return { energy: order.map((s) => s.lowest), modes, rampEnergy: [], rampModes: [] };
  };
  return {
    at,
    conductance: (voltage) => conductance({ openings: openingsOf(at(voltage)), through }, [0], kB * kelvin)[0],
    bySubband: (voltage) => at(voltage).map((state) => subbandDensity(state)(0, kB * kelvin)),
    densityOfStates: (voltage, edges) => binned(at(voltage).map(subbandDensity), edges),
  };
}

const model = data.wire ? wireOf(data.wire) : data.sweep ? sweepOf(data.sweep) : null;
window.wiresolveReport = { data, model, fermiIntegral, redraw_ms: NaN };
