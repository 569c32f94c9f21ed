// Figures and table at the one setpoint that the slider shows.

// The potential whose level points are the rest states: with an applied couple the drive's work counts.
const potential = (state) => (held ? state.energy_j : state.energy_j - state.couple_n_m * state.tip_angle_rad);
function zeroOf(frame) {
  const wells = frame.states.filter((state) => state.stable).map(potential);
  return d3.min(wells.length ? wells : frame.profile.flat().map((p) => p[1]));
}
const raised = (frame) => {
  const zero = zeroOf(frame);
  return { states: frame.states.map((state) => potential(state) - zero), pieces: frame.profile.map((piece) => piece.map((p) => [p[0], p[1] - zero])) };
};

// One scale for every slider position, so that what grows on the page grows on the arm.
const shapeView = viewWith(frames.flatMap((frame) => frame.states.flatMap((state) => [...state.shape, ...(state.worst ? state.worst.shape : [])])));
const dashOfWorst = "10 4 2 4";
const energyScale = (() => {
  const all = frames.map(raised);
  const highestState = d3.max(all.flatMap((frame) => frame.states)) || 0;
  const points = all.flatMap((frame) => frame.pieces.flat());
  const highest = d3.max(points, (p) => p[1]) || 1;
  const top = highestState > 0 ? Math.min(highestState * 1.35, Math.max(highest, highestState * 1.1)) : highest;
  return { x: padded(points.filter((p) => p[1] <= top).map((p) => degrees(p[0])), 0.03), y: [-0.16 * top, top] };
})();

function drawShapes(frame) {
  const host = document.querySelector("#fig-shape .plot");
  const side = 46;
  const foot = 54;
  const { x0, x1, y0, y1 } = shapeView;
  const tall = heightFor(host, 420);
  const scale = Math.min((host.clientWidth - 2 * side) / Math.max(x1 - x0, 1e-6), (tall - 60) / Math.max(y1 - y0, 1e-6));
  const height = Math.ceil((y1 - y0) * scale) + 60 + foot;
  const count = (kind) => frame.states.filter((state) => kindOf(state) === kind).length;
  const { svg, width } = canvas(host, height, `Shapes of the arm to scale at setpoint ${setpointText(frame.setpoint)}: `
    + `${count("stable")} stable, ${count("pass") + count("hilltop")} unstable`);
  const left = (width - (x1 - x0) * scale) / 2;
  const x = (v) => left + (v - x0) * scale;
  const y = (v) => 26 + (y1 - v) * scale;
  const ground = height - 14;
  const foot0 = ground - 40;
  const back = [-left / scale, (width - left) / scale].map((off) => x0 + off);
  drawKeepOut(svg, { width, height: foot0, x, y, scale,
    corners: [[back[0], y1 + 26 / scale], [back[1], y1 + 26 / scale], [back[1], y1 - (foot0 - 26) / scale], [back[0], y1 - (foot0 - 26) / scale]] });

  const hatch = svg.append("pattern").attr("id", "hatch").attr("width", 6).attr("height", 6).attr("patternUnits", "userSpaceOnUse")
    .attr("patternTransform", "rotate(45)");
  hatch.append("line").attr("y2", 6).attr("stroke", "#1c2228").attr("stroke-width", 1.5);
  const clamp = svg.append("g").attr("transform", `translate(${x(0)},${y(0)}) rotate(${arm.tilt_deg})`);
  clamp.append("rect").attr("x", -20).attr("y", 0).attr("width", 40).attr("height", 12).attr("fill", "url(#hatch)");
  clamp.append("line").attr("x1", -20).attr("x2", 20).attr("stroke", "#1c2228").attr("stroke-width", 2);

  const path = d3.line().x((p) => x(p[0])).y((p) => y(p[1]));
  for (const state of frame.states.filter((other) => other.worst)) {
    svg.append("path").attr("class", "worst").attr("d", path(state.worst.shape)).attr("fill", "none").attr("stroke", colourOf(state.branch))
      .attr("stroke-width", 1.75).attr("stroke-dasharray", dashOfWorst);
  }
  const drawn = frame.states.filter((state) => state.shape.length).sort((a, b) => a.stable - b.stable);
  for (const state of drawn) {
    const colour = colourOf(state.branch);
    const kind = kindOf(state);
    const [tipX, tipY] = state.shape[state.shape.length - 1];
    svg.append("path").attr("class", "shape").attr("d", path(state.shape)).attr("fill", "none").attr("stroke", colour)
      .attr("stroke-width", state.stable ? 4 : 2.5).attr("stroke-dasharray", dashFor[kind]).attr("stroke-linecap", state.stable ? "round" : "butt");
    svg.append("circle").attr("cx", x(tipX)).attr("cy", y(tipY)).attr("r", 6).attr("fill", state.stable ? colour : "#fff")
      .attr("stroke", colour).attr("stroke-width", 2);
  }
  for (const state of drawn) {
    const [tipX, tipY] = state.shape[state.shape.length - 1];
    const [px, py] = [x(tipX), y(tipY)];
    svg.append("text").attr("class", "halo").attr("x", Math.min(Math.max(px, 28), width - 28)).attr("y", py < 40 ? py - 12 : py + (tipY < 0 ? 22 : -12))
      .attr("text-anchor", "middle").style("fill", colourOf(state.branch)).text(`branch ${state.branch}`);
  }

  const bar = niceLength(90 / scale);
  const rule = svg.append("g").attr("stroke", "#1c2228").attr("stroke-width", 1.5);
  rule.append("path").attr("fill", "none").attr("d", `M4,${ground - 5}v5h${bar * scale}v-5`);
  svg.append("text").attr("x", Math.max(28, 4 + (bar * scale) / 2)).attr("y", ground - 8).attr("text-anchor", "middle")
    .text(bar < 1 ? `${Math.round(bar * 1e3)} mm` : `${bar} m`);
  const g = width - 16;
  rule.append("path").attr("fill", "none").attr("d", `M${g},${ground - 34}v32m-5,-8l5,8l5,-8`);
  svg.append("text").attr("x", g - 12).attr("y", ground - 10).attr("text-anchor", "end").text("gravity");
}

// The worst corners in words, and the regions outside the view.
function fillWorst(frame) {
  const list = d3.select("#worst-corners");
  list.selectAll("*").remove();
  for (const state of frame.states.filter((other) => other.worst)) {
    const item = list.append("li");
    item.append("strong").style("color", colourOf(state.branch)).text(`Branch ${state.branch}, worst corner: `);
    item.append("span").text(`${state.worst.words}.`);
  }
  if (shapeView.far.length) list.append("li").text(`Too far away to be drawn to scale: ${shapeView.far.join(", ")}.`);
}

function legendOfShapes() {
  const any = (of) => frames.some((frame) => frame.states.some(of));
  legend("fig-shape", [
    { colour: palette[0], width: 4, text: "stable" },
    ...(any((state) => !state.stable) ? [{ colour: grey, dash: dashFor.pass, text: "unstable" }] : []),
    ...(any((state) => state.worst) ? [{ colour: palette[0], width: 1.75, dash: dashOfWorst, text: "in its worst corner" }] : []),
    ...(data.keep_out.length ? [{ colour: "#a3271b", width: 12, opacity: 0.25, text: "keep out" }] : []),
  ]);
}

function niceLength(about) {
  const decade = 10 ** Math.floor(Math.log10(about));
  return [5, 2, 1].map((step) => step * decade).find((length) => length <= about) || decade;
}

function drawEnergy(frame) {
  const host = document.querySelector("#fig-energy .plot");
  const { states, pieces } = raised(frame);
  const heights = frame.states.map((state, i) => [state, states[i]]);
  plot(host, { height: heightFor(host, 420),
    name: `Energy along the mean angle at setpoint ${setpointText(frame.setpoint)}, wells and passes marked`,
    x: { label: "Mean angle (°)", angle: true, domain: energyScale.x },
    y: { label: "Energy above the lowest rest state (J)", least: 0, domain: energyScale.y },
    lines: [
      ...pieces.map((piece) => ({ points: piece.map((p) => [degrees(p[0]), p[1]]), colour: "#3a434b", width: 2 })),
      // How high the lowest pass stands above each well.
      ...heights.filter(([state]) => state.stable && state.barrier_j !== null).map(([state, level]) => (
        { points: [[degrees(state.mean_angle_rad), level], [degrees(state.mean_angle_rad), level + state.barrier_j]],
          colour: colourOf(state.branch), width: 1.5 })),
    ],
    marks: heights.map(([state, level]) => ({ x: degrees(state.mean_angle_rad), y: level, kind: kindOf(state),
      colour: colourOf(state.branch), text: `branch ${state.branch}`, below: state.stable })) });
}

function legendOfEnergy() {
  const any = (kind) => frames.some((frame) => frame.states.some((state) => kindOf(state) === kind));
  legend("fig-energy", [
    { symbol: "stable", colour: palette[0], text: "well (stable)" },
    ...(any("pass") ? [{ symbol: "pass", colour: grey, text: "pass" }] : []),
    ...(any("hilltop") ? [{ symbol: "hilltop", colour: grey, text: "hilltop" }] : []),
    ...(frames.some((frame) => frame.states.some((state) => state.barrier_j !== null)) ? [{ colour: palette[0], width: 1.5, text: "barrier" }] : []),
  ]);
  document.querySelector("#fig-energy figcaption").textContent =
    `Elastic plus gravity energy${held ? "" : " less the work of the applied couple"}, everything but the mean angle relaxed. `
    + "The arm rests in the wells; a knock that carries it over a pass sends it to the well beyond. "
    + "The thin upright line over a well is its barrier, up to the height of its lowest pass.";
}

function fillStates(frame) {
  const load = held ? (state) => state.couple_n_m : (state) => degrees(state.tip_angle_rad);
  const all = frames.flatMap((other) => other.states);
  const digits = held ? digitsFor(d3.max(all, (state) => Math.abs(load(state)))) : 1;
  const barrierDigits = digitsFor(d3.max(all, (state) => state.barrier_j));
  const columns = [
    { head: "Branch", of: (state) => state.branch },
    { head: "State", of: kindOf },
    { head: "Mean angle", unit: "°", number: true, of: (state) => fixed(degrees(state.mean_angle_rad), 1) },
    { head: held ? "Tip couple" : "Tip angle", unit: held ? "N m" : "°", number: true, of: (state) => fixed(load(state), digits) },
    { head: "Barrier", unit: "J", number: true, of: (state) => (state.barrier_j === null ? "–" : fixed(state.barrier_j, barrierDigits)) },
    { head: "Usable", of: (state) => (state.usable ? "yes" : `no: ${state.why_not}`) },
  ];
  const head = d3.select("#states thead");
  const body = d3.select("#states tbody");
  head.selectAll("*").remove();
  body.selectAll("*").remove();
  const top = head.append("tr");
  for (const column of columns) {
    const cell = top.append("th").attr("scope", "col").classed("n", Boolean(column.number)).text(column.head);
    if (column.unit) cell.append("span").attr("class", "unit").text(` (${column.unit})`);
  }
  for (const state of frame.states) {
    const row = body.append("tr");
    columns.forEach((column, i) => {
      const cell = row.append(i === 0 ? "th" : "td").classed("n", Boolean(column.number)).text(column.of(state));
      if (i === 0) cell.attr("scope", "row").style("color", colourOf(state.branch));
    });
  }
}
