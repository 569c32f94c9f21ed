// Regions where no part of the arm may be, in the drawing of the shapes, and the part of the plane that is drawn.

// Farthest a drawing grows to show a region, in sizes of the arm's own reach: beyond, the arm would be too small to read.
const farthestView = 0.6;

function extentOf(points) {
  const [x0, x1] = d3.extent([...points.map((p) => p[0]), 0]);
  const [y0, y1] = d3.extent([...points.map((p) => p[1]), 0]);
  return { x0, x1, y0, y1 };
}

// Points that show a region: a disc's outermost, and the half plane's nearest to the middle of the arm's reach, a little inside.
function outermost(region, reach) {
  if (region.Disc) {
    const { centre_m: [x, y], radius_m: r } = region.Disc;
    return [[x - r, y - r], [x + r, y + r]];
  }
  const { point_m: [px, py], normal: [nx, ny] } = region.HalfPlane;
  const size = Math.max(reach.x1 - reach.x0, reach.y1 - reach.y0);
  const [mx, my] = [(reach.x0 + reach.x1) / 2, (reach.y0 + reach.y1) / 2];
  const off = (mx - px) * nx + (my - py) * ny + 0.07 * size;
  return [[mx - off * nx, my - off * ny]];
}

// The view with every region that is near enough, and the names of the others.
function viewWith(points) {
  const reach = extentOf(points);
  const size = Math.max(reach.x1 - reach.x0, reach.y1 - reach.y0);
  const shown = [...points];
  const far = [];
  for (const { name, region } of data.keep_out) {
    const more = outermost(region, reach);
    const grown = extentOf([...points, ...more]);
    const near = Math.max(reach.x0 - grown.x0, grown.x1 - reach.x1, reach.y0 - grown.y0, grown.y1 - reach.y1) < farthestView * size;
    if (near) shown.push(...more);
    else far.push(name);
  }
  return { ...extentOf(shown), far };
}

// The part of the rectangle that lies in the half plane's forbidden side (Sutherland and Hodgman's clipping, one edge).
function clipped(corners, { point_m: [px, py], normal: [nx, ny] }) {
  const depth = ([x, y]) => -((x - px) * nx + (y - py) * ny);
  return corners.flatMap((a, i) => {
    const b = corners[(i + 1) % corners.length];
    const [da, db] = [depth(a), depth(b)];
    const kept = da >= 0 ? [a] : [];
    if (da < 0 === db < 0) return kept;
    const t = da / (da - db);
    return [...kept, [a[0] + t * (b[0] - a[0]), a[1] + t * (b[1] - a[1])]];
  });
}

// frame: the drawn rectangle in px and its corners in m; x, y: from m to px.
function drawKeepOut(svg, { width, height, corners, x, y, scale }) {
  if (data.keep_out.length === 0) return;
  const hatch = svg.append("pattern").attr("id", "forbidden").attr("width", 8).attr("height", 8).attr("patternUnits", "userSpaceOnUse")
    .attr("patternTransform", "rotate(-45)");
  hatch.append("rect").attr("width", 8).attr("height", 8).attr("fill", "#a3271b").attr("fill-opacity", 0.07);
  hatch.append("line").attr("y2", 8).attr("stroke", "#a3271b").attr("stroke-width", 1.5).attr("stroke-opacity", 0.55);
  const layer = svg.append("g").attr("class", "regions");
  for (const { name, region } of data.keep_out) {
    let d = "";
    let [lx, ly] = [0, 0];
    if (region.Disc) {
      const [cx, cy, r] = [x(region.Disc.centre_m[0]), y(region.Disc.centre_m[1]), region.Disc.radius_m * scale];
      d = `M${cx - r},${cy}a${r},${r} 0 1 0 ${2 * r},0a${r},${r} 0 1 0 ${-2 * r},0Z`;
      [lx, ly] = [cx, cy + 5];
    } else {
      const part = clipped(corners, region.HalfPlane);
      if (part.length < 3) continue;
      d = `M${part.map((p) => `${x(p[0])},${y(p[1])}`).join("L")}Z`;
      lx = part.reduce((sum, p) => sum + x(p[0]), 0) / part.length;
      ly = part.reduce((sum, p) => sum + y(p[1]), 0) / part.length + 5;
    }
    layer.append("path").attr("class", "keep-out").attr("d", d).attr("fill", "url(#forbidden)").attr("stroke", "#a3271b").attr("stroke-width", 1.5)
      .append("title").text(name);
    const half = 4 * name.length;
    svg.append("text").attr("class", "halo limit region").attr("x", Math.min(Math.max(lx, half), width - half)).attr("y", Math.min(Math.max(ly, 14), height - 4))
      .attr("text-anchor", "middle").text(name);
  }
}
