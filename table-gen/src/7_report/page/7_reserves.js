// Reserves over the setpoint with their limits, and where which requirement holds.

const reserveLabel = ({ name, unit }) => {
  const text = name[0].toUpperCase() + name.slice(1);
  return unit ? `${text} (${unit})` : text;
};
const shortest = (value) => minus(String(Number(value.toPrecision(3))));

// Near the limit is where it matters: what is far on the safe side may leave the figure.
function reserveDomain({ curves, limit, is_upper_limit: upper }) {
  const values = curves.flatMap((one) => one.points.map((p) => p[1])).filter(Number.isFinite);
  const most = d3.max(values);
  const least = Math.min(0, d3.min(values) || 0);
  if (upper) return [least, 1.15 * Math.max(limit, most || 0)];
  const top = limit > 0 ? Math.max(2 * limit, Math.min(1.05 * (most || 0), 8 * limit)) : 1.05 * (most || 1);
  return [least - (least < 0 ? 0.05 * (top - least) : 0), top > least ? top : least + 1];
}

function drawReserves(cursor) {
  const grid = document.querySelector("#fig-reserves .grid");
  if (grid.children.length !== data.reserves.length) {
    grid.replaceChildren(...data.reserves.map((reserve) => {
      const host = document.createElement("div");
      host.className = "plot";
      host.dataset.panel = reserve.key;
      return host;
    }));
  }
  data.reserves.forEach((reserve, i) => {
    const domain = reserveDomain(reserve);
    const [bottom, top] = domain;
    // Where no bound was found the line runs along the upper edge, dotted.
    const edge = top - 0.015 * (top - bottom);
    const lines = reserve.curves.flatMap((one) => {
      const points = one.points.map((p) => [ofSetpoint(p[0]), p[1] === null ? NaN : p[1]]);
      const unbound = one.points.map((p) => [ofSetpoint(p[0]), p[1] === null ? edge : NaN]);
      const colour = colourOf(one.branch);
      return [
        { points, colour, width: 2, kind: "bounded" },
        ...(one.points.some((p) => p[1] === null) ? [{ points: unbound, colour, width: 2, dash: "1 5", kind: "unbound" }] : []),
      ].filter((line) => line.points.some((p) => Number.isFinite(p[1])));
    });
    const hasBound = reserve.curves.some((one) => one.points.some((p) => p[1] !== null));
    const limit = `limit ${shortest(reserve.limit)}${reserve.unit === "°" ? "°" : reserve.unit ? ` ${reserve.unit}` : ""}`;
    plot(grid.children[i], { ...overSetpoint, cursor, height: onPaper() ? 172 : 200, lines,
      name: `${reserveLabel(reserve)}, worst over all corners, on each stable branch against the setpoint; ${limit}`,
      y: { label: `${reserveLabel(reserve)}${hasBound ? "" : ": no bound found"}`, domain },
      rules: [{ y: reserve.limit, kind: "limit", text: limit, forbidden: reserve.is_upper_limit ? "above" : "below" }] });
  });
}

function legendOfReserves() {
  const unbound = data.reserves.some((reserve) => reserve.curves.some((one) => one.points.some((p) => p[1] === null)));
  legend("fig-reserves", [
    ...stableBranches.map((branch) => ({ colour: colourOf(branch.number), text: `branch ${branch.number}` })),
    ...(unbound ? [{ colour: grey, dash: "1 5", text: "at the upper edge: no bound found" }] : []),
    { colour: "#a3271b", width: 1.5, text: "limit, forbidden side shaded" },
  ]);
}

function drawStrips(cursor) {
  const host = document.querySelector("#fig-strips .plot");
  const [rowHeight, gap, names] = [19, 8, 156];
  const head = 26;
  const heightOf = (strip) => head + strip.rows.reduce((sum, row, i) => sum + rowHeight + (row.kind === "all" || (i && strip.rows[i - 1].kind === "all") ? gap : 0), 0) + 14;
  const total = data.strips.reduce((sum, strip) => sum + heightOf(strip), 0) + 44;
  const { svg, width } = canvas(host, total, `Where each requirement holds along ${data.strips.length} stable branches, in every corner of the tolerances, `
    + "one row for each requirement, all together, and each payload");
  const box = { left: names, right: width - 14 };
  const x = d3.scaleLinear().domain(setpointAxis.domain).range([box.left, box.right]);
  const fails = svg.append("pattern").attr("id", "fails").attr("width", 6).attr("height", 6).attr("patternUnits", "userSpaceOnUse")
    .attr("patternTransform", "rotate(45)");
  fails.append("rect").attr("width", 6).attr("height", 6).attr("fill", "#fbe9e6");
  fails.append("line").attr("y2", 6).attr("stroke", "#a3271b").attr("stroke-width", 2);
  const bar = (cls, [from, to], y, height, fill) => {
    const [a, b] = [x(ofSetpoint(from)), x(ofSetpoint(to))];
    return svg.append("rect").attr("class", cls).attr("x", a).attr("width", Math.max(0, b - a)).attr("y", y).attr("height", height).attr("fill", fill);
  };
  let y = 0;
  for (const strip of data.strips) {
    const colour = colourOf(strip.branch);
    svg.append("text").attr("x", 0).attr("y", y + 16).attr("class", "halo").style("fill", colour).text(`Branch ${strip.branch}`);
    y += head;
    strip.rows.forEach((row, i) => {
      if (row.kind === "all" || (i && strip.rows[i - 1].kind === "all")) y += gap;
      const whole = row.kind !== "requirement";
      svg.append("text").attr("x", 0).attr("y", y + 13).style("font-weight", row.kind === "all" ? 600 : 400)
        .text(row.name[0].toUpperCase() + row.name.slice(1));
      bar("fails", strip.cover, y + 2, rowHeight - 4, "url(#fails)");
      for (const run of row.runs) {
        bar("under", run, y + 2, rowHeight - 4, "#fff");
        bar("run", run, y + 2, rowHeight - 4, colour).attr("opacity", row.kind === "all" ? 1 : whole ? 0.75 : 0.5)
          .append("title").text(`${row.name}: ${setpointText(run[0])} to ${setpointText(run[1])}`);
      }
      y += rowHeight;
    });
    y += 14;
  }
  const axis = d3.axisBottom(x).tickValues(ticksOf(x, setpointAxis, (box.right - box.left) / (width < 600 ? 55 : 75))).tickSizeOuter(0);
  if (!setpointAxis.angle) axis.tickFormat(x.tickFormat(axis.tickValues().length));
  svg.append("g").attr("class", "axis").attr("transform", `translate(0,${y - 8})`).call(axis);
  svg.append("text").attr("x", box.right).attr("y", y + 30).attr("text-anchor", "end").text(setpointLabel);
  if (Number.isFinite(cursor)) {
    svg.append("line").attr("class", "cursor").attr("x1", x(cursor)).attr("x2", x(cursor)).attr("y1", head - 4).attr("y2", y - 8);
  }
}
