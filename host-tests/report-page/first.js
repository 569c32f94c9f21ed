// Put at the top of a copy of the report, before its own scripts: keeps everything that goes wrong from then on.
const wrong = [];
window.addEventListener("error", (event) => wrong.push(event.message || `not loaded: ${event.target.tagName}`), true);
window.addEventListener("unhandledrejection", (event) => wrong.push(`rejected: ${event.reason}`));
window.addEventListener("securitypolicyviolation", (event) => wrong.push(`reaches outside: ${event.blockedURI}`));
for (const level of ["error", "warn"]) {
  console[level] = (...words) => wrong.push(`console: ${words.join(" ")}`);
}
