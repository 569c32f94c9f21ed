// The slider, and redrawing when the width changes or the page is printed.

const slider = document.getElementById("setpoint");
// Begin where there is most to see, as near the middle of the range as that goes.
const middle = (arm.setpoint_lo + arm.setpoint_hi) / 2;
let shown = frames.reduce((best, frame, i) => {
  const gain = frame.states.length - frames[best].states.length;
  const nearer = Math.abs(frame.setpoint - middle) < Math.abs(frames[best].setpoint - middle);
  return gain > 0 || (gain === 0 && nearer) ? i : best;
}, 0);

function showNearest(setpoint) {
  const off = (i) => Math.abs(ofSetpoint(frames[i].setpoint) - setpoint);
  const nearest = frames.reduce((best, _, i) => (off(i) < off(best) ? i : best), 0);
  if (nearest !== shown) show(nearest);
}

function show(i) {
  shown = i;
  draw();
}

function draw() {
  const frame = frames[shown];
  const cursor = frame ? ofSetpoint(frame.setpoint) : null;
  drawRest(cursor);
  drawLoad(cursor);
  drawTension(cursor);
  drawReserves(cursor);
  drawStrips(cursor);
  if (!frame) return;
  const text = setpointText(frame.setpoint);
  slider.value = String(shown);
  slider.setAttribute("aria-valuetext", held ? `${text} tip angle` : text);
  document.getElementById("setpoint-text").textContent = text;
  for (const place of document.querySelectorAll(".at")) place.textContent = `at ${text}`;
  drawShapes(frame);
  fillWorst(frame);
  drawEnergy(frame);
  fillStates(frame);
}

legendOfRest();
legendOfDrive();
legendOfReserves();
if (frames.length) {
  legendOfShapes();
  legendOfEnergy();
  slider.max = String(frames.length - 1);
  slider.addEventListener("input", () => show(Number(slider.value)));
  document.getElementById("setpoint-bar").hidden = false;
  document.getElementById("states").hidden = false;
} else {
  document.querySelector(".pair").hidden = true;
}

const page = document.querySelector("main");
let drawnAt = page.clientWidth;
draw();
new ResizeObserver(() => requestAnimationFrame(() => {
  if (page.clientWidth === drawnAt || onPaper()) return;
  drawnAt = page.clientWidth;
  draw();
})).observe(page);
// Paper has a width of its own: the figures are drawn for it, then for the screen again.
const redrawFor = (paper) => {
  document.documentElement.classList.toggle("paper", paper);
  draw();
};
window.addEventListener("beforeprint", () => redrawFor(true));
window.addEventListener("afterprint", () => redrawFor(false));
