/* Draws what the page has a place for, and again where its width changes. */
if (data.ladder) {
  figure("draw-ladder", drawLadder);
  figure("draw-thermal", drawAgainstThermal);
}
if (data.dispersion) figure("draw-dispersion", drawDispersion);
if (data.sensitivities) figure("draw-sensitivities", drawSensitivities);
if (data.wire) startWire();
if (data.sweep) startSweep();
if (data.curve) {
  figure("draw-density", drawGateDensity, true);
  figure("draw-capacitance", drawCapacitance, true);
  if (data.curve.transistor.length) {
    figure("draw-transfer", (width) => drawCurrents(width, "gate"));
    figure("draw-output", (width) => drawCurrents(width, "drain"));
  }
}
const fit = (width) => {
  for (const one of figures) {
    const wide = Math.round(width ?? one.box.clientWidth);
    if (wide > 0 && wide !== one.width) drawOne(one, wide);
  }
};
fit();
let resized;
addEventListener("resize", () => {
  clearTimeout(resized);
  resized = setTimeout(() => fit(), 80);
});
const sources = [...document.querySelectorAll("#materials details")];
addEventListener("beforeprint", () => {
  for (const one of sources) [one.dataset.open, one.open] = [one.open ? "yes" : "", true];
  fit(640);
});
addEventListener("afterprint", () => {
  for (const one of sources) one.open = one.dataset.open === "yes";
  fit();
});

// Drawn again once or twice while the reader looks: the first move of a slider is then as quick as the later ones.
let rounds = 0;
const idle = window.requestIdleCallback ?? ((work) => setTimeout(work, 300));
const warm = () => {
  redraw();
  if (++rounds < 4) idle(warm);
};
if (model) idle(warm);
