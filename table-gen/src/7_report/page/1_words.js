// Data, units and words. The files of this folder are joined in the order of their numbers into one function.

const data = JSON.parse(document.getElementById("report-data").textContent);
const { arm, branches, folds, frames } = data;
const held = arm.drive === "held-tip";

const degrees = (rad) => (rad === null ? null : (rad * 180) / Math.PI);
const ofSetpoint = (value) => (held ? degrees(value) : value);
const setpointLabel = held ? "Tip angle setpoint (°)" : "Tip couple setpoint (N m)";
const minus = (text) => (/^-[0.]*$/.test(text) ? text.slice(1) : text.replace("-", "−"));
const fixed = (value, digits) => (Number.isFinite(value) ? minus(value.toFixed(digits)) : "–");
// Digits behind the point that show three figures of the largest value of a column.
const digitsFor = (largest) => (largest > 0 ? Math.min(6, Math.max(0, 2 - Math.floor(Math.log10(largest)))) : 2);
const spanOfSetpoints = Math.max(Math.abs(arm.setpoint_lo), Math.abs(arm.setpoint_hi));
const setpointText = (value) => (held ? `${fixed(degrees(value), 1)}°` : `${fixed(value, digitsFor(spanOfSetpoints))} N m`);
const kindOf = (state) => (state.stable ? "stable" : state.index === 1 ? "pass" : "hilltop");
