// Put at the end of a copy of the report: moves the slider as a hand would, measures what is drawn, and tells the frame around it.
(async () => {
  const turn = () => new Promise((done) => setTimeout(done, 100));
  const all = (selector) => [...document.querySelectorAll(selector)];

  function look() {
    const svgs = all(".plot svg").map((svg) => {
      const box = svg.getBoundingClientRect();
      const scale = box.width / svg.viewBox.baseVal.width;
      const sizes = [...svg.querySelectorAll("text")].map((text) => parseFloat(getComputedStyle(text).fontSize) * scale);
      const outside = [...svg.querySelectorAll("text")].filter((text) => {
        const place = text.getBoundingClientRect();
        return place.left < box.left - 1 || place.right > box.right + 1;
      });
      return {
        figure: svg.closest("figure").id, role: svg.getAttribute("role"), name: svg.getAttribute("aria-label"),
        width: box.width, panel: svg.parentNode.dataset.panel || "",
        marks: svg.querySelectorAll("path.series, path.mark, path.shape, rect.run").length,
        limits: svg.querySelectorAll("line.limit").length,
        broken: svg.outerHTML.includes("NaN") || svg.outerHTML.includes("Infinity"),
        smallest_text_px: Math.min(...sizes), text_outside: outside.map((text) => text.textContent),
      };
    });
    return {
      scroll_width: document.documentElement.scrollWidth,
      setpoint: document.getElementById("setpoint-text").textContent,
      value_text: document.getElementById("setpoint").getAttribute("aria-valuetext"),
      shapes: all("#fig-shape path.shape").map((path) => (
        { d: path.getAttribute("d"), length: path.getTotalLength(), dashed: path.hasAttribute("stroke-dasharray") })),
      cursors: all("line.cursor").map((line) => line.getAttribute("x1")),
      // How far the wells and passes of the energy figure lie from its curve, px.
      off_curve: all("#fig-energy .plot path.mark-stable, #fig-energy .plot path.mark-pass").map((mark) => {
        const at = mark.transform.baseVal.consolidate().matrix;
        const gaps = all("#fig-energy path.series").filter((path) => path.getAttribute("stroke") === "#3a434b").flatMap((path) => {
          const length = path.getTotalLength();
          return Array.from({ length: 2001 }, (_, i) => path.getPointAtLength((length * i) / 2000))
            .map((p) => Math.hypot(p.x - at.e, p.y - at.f));
        });
        return Math.min(...gaps);
      }),
      rows: all("#states tbody tr").length,
      usable: all("#states tbody tr").map((row) => row.lastChild.textContent),
      worst: all("#fig-shape path.worst").map((path) => ({ d: path.getAttribute("d"), length: path.getTotalLength(), dashed: path.hasAttribute("stroke-dasharray") })),
      worst_words: all("#worst-corners li").map((item) => item.textContent),
      regions: all("#fig-shape path.keep-out").map((path) => {
        const { width, height } = path.getBBox();
        return { name: path.textContent, width, height };
      }),
      region_names: all("#fig-shape text.region").map((text) => text.textContent),
      runs: all("#fig-strips rect.run").map((bar) => Number(bar.getAttribute("width"))),
      strip_rows: all("#fig-strips rect.fails").length,
      verdict: document.querySelector(".verdict").textContent,
      verdict_height: document.querySelector(".verdict").getBoundingClientRect().height,
      svgs,
    };
  }

  const slider = document.getElementById("setpoint");
  async function moveTo(value) {
    slider.value = String(value);
    slider.dispatchEvent(new Event("input", { bubbles: true }));
    await turn();
    return { frame: Number(slider.value), ...look() };
  }

  await turn();
  const results = { width: window.innerWidth, first: { frame: Number(slider.value), ...look() }, moved: [] };
  for (const part of [0, 0.25, 0.5, 0.75, 1]) results.moved.push(await moveTo(Math.round(part * Number(slider.max))));
  window.dispatchEvent(new Event("beforeprint"));
  results.paper = look();
  window.dispatchEvent(new Event("afterprint"));
  results.after_paper = look();
  results.requests = performance.getEntriesByType("resource").map((entry) => entry.name);
  results.wrong = wrong;
  window.parent.postMessage(results, "*");
})().catch((problem) => window.parent.postMessage({ width: window.innerWidth, wrong: [...wrong, `probe: ${problem}`] }, "*"));
