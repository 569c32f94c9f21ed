// A recorded rehearsal: everything is drawn once, then a moment is shown by moving the arm and the cursors.

const data = JSON.parse(document.getElementById("rehearsal-data").textContent);
const { moments, lines, limits } = data;
const last = moments.time_s.length - 1;
const degrees = (rad) => (rad === null ? null : (rad * 180) / Math.PI);
const minus = (text) => (/^-[0.]*$/.test(text) ? text.slice(1) : text.replace("-", "−"));
const fixed = (value, digits) => (Number.isFinite(value) ? minus(value.toFixed(digits)) : "–");
const blue = "#0b62a8", orange = "#a8480a", green = "#00705a", grey = "#59626b";
const modes = {
  hold: { colour: "#00705a", text: "hold" }, survey: { colour: "#6b5900", text: "survey" },
  inject: { colour: "#a8480a", text: "inject" }, lean: { colour: "#a8480a", text: "lean" },
  catch: { colour: "#86377b", text: "catch" }, stopped: { colour: "#59626b", text: "stopped" },
};
const cursors = [];
let shown = 0;
let moveArm = () => {};

function canvas(host, height, name) {
  const width = Math.floor(host.clientWidth);
  host.replaceChildren();
  const svg = d3.select(host).append("svg").attr("width", width).attr("height", height)
    .attr("viewBox", `0 0 ${width} ${height}`).attr("role", "img").attr("aria-label", name);
  return { svg, width };
}

function padded(values) {
  const [lo, hi] = d3.extent(values.filter(Number.isFinite));
  if (lo === undefined) return [0, 1];
  const room = Math.max(0.06 * (hi - lo), 1e-3);
  return [lo - room, hi + room];
}

function timeScale(width) {
  return d3.scaleLinear().domain([0, moments.time_s[last]]).range([54, width - 14]);
}

function addCursor(svg, x, top, bottom) {
  const line = svg.append("line").attr("class", "cursor").attr("y1", top).attr("y2", bottom);
  cursors.push((t) => line.attr("x1", x(t)).attr("x2", x(t)));
  const at = (event) => show(nearest(x.invert(event.clientX - svg.node().getBoundingClientRect().left)));
  svg.append("rect").attr("class", "pick").attr("x", 54).attr("y", top).attr("height", bottom - top)
    .attr("width", Math.max(0, x.range()[1] - 54))
    .on("pointerdown", at).on("pointermove", (event) => { if (event.buttons & 1) at(event); });
}

function legend(figure, series) {
  const list = d3.select(`#${figure} .legend`);
  list.selectAll("*").remove();
  for (const line of series) {
    const item = list.append("li");
    item.append("svg").attr("width", 34).attr("height", 16).attr("aria-hidden", "true").append("line")
      .attr("x1", 2).attr("x2", 32).attr("y1", 8).attr("y2", 8).attr("stroke", line.colour)
      .attr("stroke-width", line.width || 2).attr("stroke-dasharray", line.dash || null);
    item.append("span").text(line.text);
  }
}

function overTime(figure, label, series, rules) {
  const host = document.querySelector(`#${figure} .plot`);
  const height = 230;
  const { svg, width } = canvas(host, height, label);
  const [top, bottom] = [26, height - 44];
  const x = timeScale(width);
  const y = d3.scaleLinear().domain(padded(series.flatMap((line) => line.values))).range([bottom, top]);
  svg.append("clipPath").attr("id", `inside-${figure}`).append("rect").attr("x", 54).attr("y", top - 1)
    .attr("width", Math.max(0, width - 68)).attr("height", bottom - top + 2);
  svg.append("g").attr("class", "axis").attr("transform", `translate(0,${bottom})`)
    .call(d3.axisBottom(x).ticks(width < 600 ? 5 : 12).tickSizeOuter(0));
  svg.append("g").attr("class", "axis").attr("transform", "translate(54,0)").call(d3.axisLeft(y).ticks(5).tickSizeOuter(0))
    .selectAll(".tick").append("line").attr("class", "grid").attr("x2", width - 68);
  svg.append("text").attr("x", 0).attr("y", 13).text(label);
  svg.append("text").attr("x", width - 14).attr("y", height - 6).attr("text-anchor", "end").text("Time (s)");
  const area = svg.append("g").attr("clip-path", `url(#inside-${figure})`);
  for (const level of rules || []) {
    area.append("line").attr("class", "limit").attr("x1", 54).attr("x2", width - 14).attr("y1", y(level)).attr("y2", y(level));
  }
  for (const line of series) {
    const path = d3.line().defined((i) => Number.isFinite(line.values[i])).x((i) => x(moments.time_s[i])).y((i) => y(line.values[i]));
    area.append("path").attr("class", "series").attr("fill", "none").attr("stroke", line.colour)
      .attr("stroke-width", line.width || 2).attr("stroke-dasharray", line.dash || null)
      .attr("stroke-linejoin", "round").attr("d", path(moments.time_s.map((_, i) => i)));
  }
  addCursor(svg, x, top, bottom);
  legend(figure, series);
}

function drawModes() {
  const { svg, width } = canvas(document.querySelector("#fig-mode .plot"), 74, "Mode of the firmware over time");
  const x = timeScale(width);
  for (let from = 0; from <= last;) {
    let to = from;
    while (to < last && moments.mode[to + 1] === moments.mode[from] && moments.branch[to + 1] === moments.branch[from]) to += 1;
    const mode = modes[moments.mode[from]];
    const [left, right] = [x(from ? moments.time_s[from] : 0), x(moments.time_s[Math.min(to + 1, last)])];
    svg.append("rect").attr("x", left).attr("width", Math.max(1, right - left)).attr("y", 4).attr("height", 26).attr("fill", mode.colour)
      .attr("stroke", "#fff").append("title").text(mode.text);
    const branch = moments.branch[from] === null ? "" : ` ${moments.branch[from]}`;
    if (right - left > 8 * (mode.text.length + branch.length)) {
      svg.append("text").attr("class", "mode-text").attr("x", (left + right) / 2).attr("y", 22).attr("text-anchor", "middle").style("fill", "#fff").text(mode.text + branch);
    }
    from = to + 1;
  }
  svg.append("g").attr("class", "axis").attr("transform", "translate(0,34)").call(d3.axisBottom(x).ticks(width < 600 ? 5 : 12).tickSizeOuter(0));
  svg.append("text").attr("x", width - 14).attr("y", 70).attr("text-anchor", "end").text("Time (s)");
  addCursor(svg, x, 2, 34);
}

// Keep-out regions are cut to what is in view.
function drawRegion(area, region, sx, sy, view) {
  if (region.radius_m !== undefined) {
    area.append("circle").attr("cx", sx(region.centre_m[0])).attr("cy", sy(region.centre_m[1]))
      .attr("r", Math.abs(sx(region.radius_m) - sx(0))).attr("fill", "url(#hatch)").attr("stroke", "#a3271b");
  } else {
    const [nx, ny] = region.normal, [px, py] = region.point_m, far = 4 * view;
    const corner = (along, deep) => [sx(px - ny * along - nx * deep), sy(py + nx * along - ny * deep)].join(",");
    area.append("polygon").attr("points", [corner(-far, 0), corner(far, 0), corner(far, far), corner(-far, far)].join(" "))
      .attr("fill", "url(#hatch)").attr("stroke", "#a3271b");
  }
}

function drawArm() {
  const host = document.querySelector("#fig-arm .plot");
  const size = Math.min(440, Math.floor(host.clientWidth));
  const { svg, width } = canvas(host, size, "The arm in side view");
  const xs = moments.shape_mm.flatMap((shape) => shape.filter((_, i) => i % 2 === 0));
  const ys = moments.shape_mm.flatMap((shape) => shape.filter((_, i) => i % 2 === 1));
  const [left, right] = d3.extent(xs), [low, high] = d3.extent(ys);
  const view = 1.15 * Math.max(right - left, high - low, 1);
  const [cx, cy] = [(left + right) / 2, (low + high) / 2];
  const scale = Math.min(width, size) / view;
  const sx = (mm) => width / 2 + (mm - cx) * scale;
  const sy = (mm) => size / 2 - (mm - cy) * scale;
  const hatch = svg.append("pattern").attr("id", "hatch").attr("width", 8).attr("height", 8).attr("patternUnits", "userSpaceOnUse").attr("patternTransform", "rotate(45)");
  hatch.append("line").attr("y2", 8).attr("stroke", "#a3271b").attr("stroke-width", 1.5).attr("opacity", 0.6);
  svg.append("clipPath").attr("id", "inside-arm").append("rect").attr("width", width).attr("height", size);
  const area = svg.append("g").attr("clip-path", "url(#inside-arm)");
  for (const region of data.keep_out) drawRegion(area, region, (m) => sx(1e3 * m), (m) => sy(1e3 * m), view / 1e3);
  const trail = area.append("path").attr("fill", "none").attr("stroke", blue).attr("stroke-width", 1.5).attr("opacity", 0.5);
  const spine = area.append("path").attr("fill", "none").attr("stroke", blue).attr("stroke-width", 5).attr("stroke-linecap", "round").attr("stroke-linejoin", "round");
  const base = area.append("rect").attr("x", sx(0) - 12).attr("y", sy(0)).attr("width", 24).attr("height", 8).attr("fill", grey);
  base.append("title").text("base");
  const tip = area.append("circle").attr("r", 8).attr("fill", "#1c2228");
  const points = (shape) => shape.reduce((out, value, i) => out + (i % 2 ? `,${sy(value).toFixed(1)}` : `${i ? "L" : "M"}${sx(value).toFixed(1)}`), "");
  const end = (i) => moments.shape_mm[i].slice(-2);
  moveArm = (i) => {
    spine.attr("d", points(moments.shape_mm[i]));
    tip.attr("cx", sx(end(i)[0])).attr("cy", sy(end(i)[1]));
    let from = i;
    while (from > 0 && moments.time_s[i] - moments.time_s[from] < 1) from -= 1;
    trail.attr("d", points(moments.shape_mm.slice(from, i + 1).flatMap((shape) => shape.slice(-2))));
  };
}

function nearest(t) {
  const [step, first] = [moments.time_s[1] - moments.time_s[0], moments.time_s[0]];
  return Math.min(last, Math.max(0, Math.round((t - first) / step)));
}

const slider = document.getElementById("time");
const items = [...document.querySelectorAll("#timeline li")];

function show(i) {
  shown = i;
  const t = moments.time_s[i];
  for (const move of cursors) move(t);
  moveArm(i);
  slider.value = String(i);
  const text = `${fixed(t, 2)} s`;
  slider.setAttribute("aria-valuetext", text);
  document.getElementById("time-text").textContent = text;
  for (const place of document.querySelectorAll(".at")) place.textContent = `at ${text}`;
  const mode = modes[moments.mode[i]].text;
  const branch = moments.branch[i] === null ? "branch not known" : `branch ${moments.branch[i]}`;
  document.getElementById("now").textContent = `${mode}, ${branch}; tip ${fixed(degrees(moments.tip_rad[i]), 1)}°, couple ${fixed(moments.couple_n_m[i], 3)} N m, tensions ${fixed(moments.tension_a_n[i], 1)} and ${fixed(moments.tension_b_n[i], 1)} N`;
  let latest = -1;
  lines.forEach((at, k) => { if (at <= t + 0.013) latest = k; });
  items.forEach((item, k) => {
    item.classList.toggle("past", k < latest);
    item.classList.toggle("latest", k === latest);
  });
}

function draw() {
  cursors.length = 0;
  drawArm();
  drawModes();
  const inDegrees = (values) => values.map(degrees);
  const held = data.drive === "held-tip";
  overTime("fig-angles", "Angle (°)", [
    { text: "tip sensor", values: inDegrees(moments.tip_measured_rad), colour: grey, width: 1 },
    { text: "mid-length sensor", values: inDegrees(moments.mid_measured_rad), colour: grey, width: 1, dash: "3 2" },
    { text: "tip", values: inDegrees(moments.tip_rad), colour: blue },
    { text: "mid-length", values: inDegrees(moments.mid_rad), colour: orange },
    ...(held ? [{ text: "setpoint commanded", values: inDegrees(moments.setpoint), colour: "#1c2228", width: 1.5, dash: "7 4" }] : []),
  ]);
  overTime("fig-couple", "Couple (N m)", [
    { text: "commanded", values: moments.commanded_n_m, colour: "#1c2228", width: 1.5, dash: "7 4" },
    { text: "of the tendons on the tip", values: moments.couple_n_m, colour: green },
    ...(held ? [] : [{ text: "setpoint commanded", values: moments.setpoint, colour: orange, width: 1.5, dash: "2 3" }]),
  ]);
  overTime("fig-tensions", "Tension (N)", [
    { text: "tendon A", values: moments.tension_a_n, colour: blue },
    { text: "tendon B", values: moments.tension_b_n, colour: orange, dash: "9 3 2 3" },
  ], [limits.pretension_n, limits.max_tension_n]);
  show(shown);
}

let playing = null;
const button = document.getElementById("play");
function stop() {
  if (playing) cancelAnimationFrame(playing.frame);
  playing = null;
  button.textContent = "Play";
}
function run(now) {
  if (!playing) return;
  const t = playing.from_s + (now - playing.begun) / 1e3;
  if (t >= moments.time_s[last]) {
    show(last);
    stop();
    return;
  }
  show(nearest(t));
  playing.frame = requestAnimationFrame(run);
}
button.addEventListener("click", () => {
  if (playing) { stop(); return; }
  const from_s = shown >= last ? 0 : moments.time_s[shown];
  button.textContent = "Pause";
  playing = { from_s, begun: performance.now(), frame: requestAnimationFrame(run) };
});
slider.max = String(last);
slider.addEventListener("input", () => { stop(); show(Number(slider.value)); });
items.forEach((item, k) => item.querySelector("button").addEventListener("click", () => { stop(); show(nearest(lines[k])); }));
document.getElementById("time-bar").hidden = false;

const page = document.querySelector("main");
const onPaper = () => document.documentElement.classList.contains("paper");
let drawnAt = page.clientWidth;
draw();
new ResizeObserver(() => requestAnimationFrame(() => {
  if (page.clientWidth === drawnAt || onPaper()) return;
  drawnAt = page.clientWidth;
  draw();
})).observe(page);
const redrawFor = (paper) => { document.documentElement.classList.toggle("paper", paper); draw(); };
window.addEventListener("beforeprint", () => redrawFor(true));
window.addEventListener("afterprint", () => redrawFor(false));
