// Figures over the setpoint. A new one is a call of `plot` with its lines and marks, added to `draw` in 6_slider.js.

const setpointAxis = { label: setpointLabel, angle: held, domain: [ofSetpoint(arm.setpoint_lo), ofSetpoint(arm.setpoint_hi)] };
const curve = (points, of) => points.map((p) => [ofSetpoint(p.setpoint), of(p)]);

// The part of a curve between two setpoints, with its ends put in by straight lines.
function cut(points, from, to) {
  const inside = points.filter((p) => p[0] > from && p[0] < to);
  const at = (s) => {
    const i = points.findIndex((p) => p[0] >= s);
    if (i <= 0) return i === 0 && points[0][0] === s ? [points[0]] : [];
    const [a, b] = [points[i - 1], points[i]];
    return [[s, a[1] + ((b[1] - a[1]) * (s - a[0])) / (b[0] - a[0])]];
  };
  return [...at(from), ...inside, ...at(to)];
}

const bandsOf = (branch, of) => branch.stretches.map((part) => (
  { points: cut(curve(branch.points, of), ofSetpoint(part.from), ofSetpoint(part.to)), colour: colourOf(branch.number) }));
// Labels sit towards the end that leaves through the range, where branches are well apart.
const labelOf = (branch) => (
  { text: `branch ${branch.number}`, at: branch.to_end === "range" ? 0.88 : branch.from_end === "range" ? 0.12 : 0.5 });
const overSetpoint = { x: setpointAxis, pick: frames.length ? showNearest : null };

function drawRest(cursor) {
  const mean = (p) => degrees(p.mean_angle_rad);
  const marks = [
    ...folds.map((fold) => ({ x: ofSetpoint(fold.setpoint), y: mean(fold), kind: "fold", colour: "#1c2228",
      title: `Fold at ${setpointText(fold.setpoint)}: branches ${fold.branches.join(" and ")} end` })),
    ...data.false_friends.map((state) => ({ x: ofSetpoint(state.setpoint), y: mean(state), kind: "false", colour: "#a3271b",
      title: `Only in the two-coordinate model: ${setpointText(state.setpoint)}` })),
  ];
  const heights = [...branches.flatMap((branch) => branch.points.map(mean)), ...marks.map((mark) => mark.y)];
  const host = document.querySelector("#fig-rest .plot");
  plot(host, { ...overSetpoint, cursor, marks, height: heightFor(host, 420),
    name: `Mean angle of every rest state against the setpoint: ${stableBranches.length} stable and `
      + `${branches.length - stableBranches.length} unstable branches, ${folds.length} folds`,
    y: { label: "Mean angle (°)", angle: true, domain: padded(heights, 0.06) },
    bands: branches.flatMap((branch) => bandsOf(branch, mean)),
    lines: branches.map((branch) => ({ points: curve(branch.points, mean), colour: colourOf(branch.number),
      dash: dashFor[kindOf(branch)], width: branch.stable ? 2.5 : 2, label: labelOf(branch) })) });
}

function legendOfRest() {
  const any = (kind) => branches.some((branch) => kindOf(branch) === kind);
  const blue = palette[0];
  legend("fig-rest", [
    { colour: blue, text: "stable" },
    ...(any("pass") ? [{ colour: grey, dash: dashFor.pass, text: "unstable, a pass" }] : []),
    ...(any("hilltop") ? [{ colour: grey, dash: dashFor.hilltop, text: "unstable, a hilltop" }] : []),
    { colour: blue, width: 12, opacity: 0.25, text: "may be used" },
    ...(folds.length ? [{ symbol: "fold", colour: "#1c2228", text: "fold" }] : []),
    ...(data.false_friends.length ? [{ symbol: "false", colour: "#a3271b", text: "only in the two-coordinate model" }] : []),
  ]);
}

function drawLoad(cursor) {
  const host = document.querySelector('#fig-drive [data-panel="load"]');
  const of = held ? (p) => p.couple_n_m : (p) => degrees(p.tip_angle_rad);
  plot(host, { ...overSetpoint, cursor, height: heightFor(host, 270),
    name: `${held ? "Tip couple" : "Tip angle"} on each stable branch against the setpoint`,
    y: { label: held ? "Tip couple (N m)" : "Tip angle (°)", angle: !held, domain: padded(stableBranches.flatMap((b) => b.points.map(of)), 0.08) },
    rules: [{ y: 0, kind: "zero" }],
    bands: stableBranches.flatMap((branch) => bandsOf(branch, of)),
    lines: stableBranches.map((branch) => ({ points: curve(branch.points, of), colour: colourOf(branch.number), label: labelOf(branch) })) });
}

function drawTension(cursor) {
  const host = document.querySelector('#fig-drive [data-panel="tension"]');
  const tendons = [["a", (p) => p.tension_a_n], ["b", (p) => p.tension_b_n]];
  const values = stableBranches.flatMap((branch) => branch.points.flatMap((p) => tendons.map(([, of]) => of(p))));
  plot(host, { ...overSetpoint, cursor, height: heightFor(host, 270),
    name: `Tension of both tendons on each stable branch against the setpoint, limits 0 and ${arm.max_tension_n} N`,
    y: { label: "Tendon tension (N)", domain: padded([...values, 0, arm.max_tension_n], 0.26) },
    rules: [{ y: arm.max_tension_n, kind: "limit", text: `limit ${arm.max_tension_n} N` }, { y: 0, kind: "limit", text: "slack below 0 N", below: true }],
    lines: stableBranches.flatMap((branch) => tendons.map(([name, of]) => (
      { points: curve(branch.points, of), colour: colourOf(branch.number), dash: dashOfTendon[name], width: 2 }))) });
}

function legendOfDrive() {
  legend("fig-drive", [
    ...stableBranches.map((branch) => ({ colour: colourOf(branch.number), text: `branch ${branch.number}` })),
    { colour: grey, dash: dashOfTendon.a, text: "tendon A" },
    { colour: grey, dash: dashOfTendon.b, text: "tendon B" },
    ...(stableBranches.some((branch) => branch.stretches.length) ? [{ colour: grey, width: 12, opacity: 0.25, text: "may be used" }] : []),
  ]);
}
