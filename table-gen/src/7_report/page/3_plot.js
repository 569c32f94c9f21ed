// One plot: axes, bands under the lines, lines, rules across, marks, a cursor that follows the slider.
// Figures are redrawn at the width they have, never scaled, so that type keeps its size on a telephone and on paper.

function canvas(host, height, name) {
  const width = Math.floor(host.clientWidth);
  host.replaceChildren();
  const svg = d3.select(host).append("svg").attr("width", width).attr("height", height)
    .attr("viewBox", `0 0 ${width} ${height}`).attr("role", "img").attr("aria-label", name);
  return { svg, width };
}

const onPaper = () => document.documentElement.classList.contains("paper");
const heightFor = (host, wide) => Math.round(wide * (onPaper() ? 0.75 : host.clientWidth < 600 ? 0.8 : 1));

// Degrees are read in parts of a right angle; everything else in tens.
function ticksOf(scale, axis, count) {
  const [lo, hi] = scale.domain();
  if (!axis.angle) return scale.ticks(count).filter((value) => !(value < axis.least));
  const step = [0.5, 1, 2, 5, 10, 15, 30, 45, 90, 180].find((angle) => (hi - lo) / angle <= count);
  if (!step) return scale.ticks(count);
  const first = Math.ceil(lo / step - 1e-9);
  return Array.from({ length: Math.floor(hi / step + 1e-9) - first + 1 }, (_, i) => (first + i) * step);
}

function padded(values, share) {
  const [lo, hi] = d3.extent(values.filter(Number.isFinite));
  if (lo === undefined) return [0, 1];
  const room = hi > lo ? (hi - lo) * share : Math.max(Math.abs(hi) * 0.1, 1e-3);
  return [lo - room, hi + room];
}

// spec: { name, height, x: { label, domain, angle? }, y: { label, domain, angle?, least? }, bands?, lines, rules?, marks?, cursor?, pick? }
// bands and lines: { points: [[x, y]], colour, dash?, width?, label?: { text, at: share of the line } }
// rules: { y, text?, kind: "limit" | "zero", forbidden?: "above" | "below" }; marks: { x, y, kind, colour, text?, title? }
function plot(host, spec) {
  const { svg, width } = canvas(host, spec.height, spec.name);
  const box = { left: 54, right: width - 14, top: 26, bottom: spec.height - 44 };
  const x = d3.scaleLinear().domain(spec.x.domain).range([box.left, box.right]);
  const y = d3.scaleLinear().domain(spec.y.domain).range([box.bottom, box.top]);
  const across = d3.axisBottom(x).tickValues(ticksOf(x, spec.x, (box.right - box.left) / (width < 600 ? 55 : 75))).tickSizeOuter(0);
  const upright = d3.axisLeft(y).tickValues(ticksOf(y, spec.y, (box.bottom - box.top) / (spec.y.angle ? 32 : 42))).tickSizeOuter(0);
  for (const [axis, scale, of] of [[across, x, spec.x], [upright, y, spec.y]]) {
    if (!of.angle) axis.tickFormat(scale.tickFormat(axis.tickValues().length));
  }
  const inside = `inside-${host.closest("figure").id}-${host.dataset.panel || "only"}`;
  svg.append("clipPath").attr("id", inside).append("rect").attr("x", box.left).attr("y", box.top - 1)
    .attr("width", Math.max(0, box.right - box.left)).attr("height", box.bottom - box.top + 2);

  svg.append("g").attr("class", "axis").attr("transform", `translate(0,${box.bottom})`).call(across);
  svg.append("g").attr("class", "axis").attr("transform", `translate(${box.left},0)`).call(upright)
    .selectAll(".tick").append("line").attr("class", "grid").attr("x2", box.right - box.left);
  svg.append("text").attr("x", 0).attr("y", 13).text(spec.y.label);
  svg.append("text").attr("x", box.right).attr("y", spec.height - 6).attr("text-anchor", "end").text(spec.x.label);

  if (spec.pick) {
    const at = (event) => spec.pick(x.invert(event.clientX - svg.node().getBoundingClientRect().left));
    svg.append("rect").attr("class", "pick").attr("x", box.left).attr("y", box.top)
      .attr("width", Math.max(0, box.right - box.left)).attr("height", box.bottom - box.top)
      .on("pointerdown", at).on("pointermove", (event) => { if (event.buttons & 1) at(event); });
  }

  const path = d3.line().defined((p) => Number.isFinite(p[0]) && Number.isFinite(p[1])).x((p) => x(p[0])).y((p) => y(p[1]));
  const area = svg.append("g").attr("clip-path", `url(#${inside})`);
  for (const band of spec.bands || []) {
    area.append("path").attr("class", "band").attr("d", path(band.points)).attr("fill", "none").attr("stroke", band.colour)
      .attr("stroke-width", 12).attr("opacity", 0.25);
  }
  for (const rule of spec.rules || []) {
    const level = y(rule.y);
    if (rule.forbidden) {
      const [from, to] = rule.forbidden === "above" ? [box.top, level] : [level, box.bottom];
      area.append("rect").attr("class", "forbidden").attr("x", box.left).attr("width", Math.max(0, box.right - box.left))
        .attr("y", from).attr("height", Math.max(0, to - from));
    }
    area.append("line").attr("class", rule.kind).attr("x1", box.left).attr("x2", box.right).attr("y1", level).attr("y2", level);
    if (rule.text) {
      svg.append("text").attr("class", `halo ${rule.kind}`).attr("x", box.right - 4).attr("y", level + (rule.below ? 16 : -6))
        .attr("text-anchor", "end").text(rule.text);
    }
  }
  for (const line of spec.lines) {
    area.append("path").attr("class", line.kind ? `series ${line.kind}` : "series").attr("d", path(line.points)).attr("fill", "none").attr("stroke", line.colour)
      .attr("stroke-width", line.width || 2.5).attr("stroke-dasharray", line.dash || null).attr("stroke-linejoin", "round")
      .attr("stroke-linecap", line.kind === "bounded" ? "round" : null);
  }
  if (Number.isFinite(spec.cursor)) {
    area.append("line").attr("class", "cursor").attr("x1", x(spec.cursor)).attr("x2", x(spec.cursor)).attr("y1", box.top).attr("y2", box.bottom);
  }
  for (const mark of spec.marks || []) {
    if (!Number.isFinite(mark.x) || !Number.isFinite(mark.y)) continue;
    drawSymbol(svg, mark.kind, x(mark.x), y(mark.y), mark.colour, mark.title);
    if (mark.text) {
      svg.append("text").attr("class", "halo").attr("x", x(mark.x)).attr("y", y(mark.y) + (mark.below ? 22 : -12))
        .attr("text-anchor", "middle").style("fill", mark.colour).text(mark.text);
    }
  }
  for (const line of spec.lines) {
    if (!line.label || line.points.length === 0) continue;
    const p = line.points[Math.round(line.label.at * (line.points.length - 1))];
    const px = Math.min(Math.max(x(p[0]), box.left + 34), box.right - 34);
    const py = y(p[1]) < box.top + 24 ? y(p[1]) + 24 : y(p[1]) - 12;
    svg.append("text").attr("class", "halo").attr("x", px).attr("y", py).attr("text-anchor", "middle")
      .style("fill", line.colour).text(line.label.text);
  }
}
