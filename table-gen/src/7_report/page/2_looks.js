// Looks. Colours keep 4.5:1 on white and stay apart for the colour-blind; line style and symbol say the same again.

const palette = ["#0b62a8", "#a8480a", "#00705a", "#86377b", "#6b5900", "#4b4fa3"];
const grey = "#59626b";
const stableBranches = branches.filter((branch) => branch.stable);
const colours = new Map(stableBranches.map((branch, i) => [branch.number, palette[i % palette.length]]));
const colourOf = (number) => colours.get(number) || grey;
const dashFor = { stable: null, pass: "7 4", hilltop: "2 4" };
const dashOfTendon = { a: null, b: "9 3 2 3" };
const symbols = {
  stable: { type: d3.symbolCircle, size: 80, filled: true },
  pass: { type: d3.symbolTriangle, size: 80, filled: false },
  hilltop: { type: d3.symbolSquare2, size: 60, filled: false },
  fold: { type: d3.symbolDiamond2, size: 70, filled: false },
  false: { type: d3.symbolTimes, size: 70, filled: false },
};

function drawSymbol(parent, kind, x, y, colour, title) {
  const { type, size, filled } = symbols[kind];
  const mark = parent.append("path").attr("class", `mark mark-${kind}`).attr("d", d3.symbol(type, size)())
    .attr("transform", `translate(${x},${y})`)
    .attr("fill", filled ? colour : kind === "false" ? "none" : "#fff").attr("stroke", colour).attr("stroke-width", 2);
  if (title) mark.append("title").text(title);
}

function legend(figure, entries) {
  const list = d3.select(`#${figure} .legend`);
  list.selectAll("*").remove();
  for (const entry of entries) {
    const item = list.append("li");
    const svg = item.append("svg").attr("width", 34).attr("height", 16).attr("aria-hidden", "true");
    if (entry.symbol) drawSymbol(svg, entry.symbol, 17, 8, entry.colour);
    else {
      svg.append("line").attr("x1", 2).attr("x2", 32).attr("y1", 8).attr("y2", 8).attr("stroke", entry.colour)
        .attr("stroke-width", entry.width || 2.5).attr("stroke-dasharray", entry.dash || null).attr("opacity", entry.opacity || 1);
    }
    item.append("span").text(entry.text);
  }
}
