// What the report's scripts use, and nothing else: the bundler drops the rest.
export { axisBottom, axisLeft } from "d3-axis";
export { extent, max, min } from "d3-array";
export { scaleLinear } from "d3-scale";
export { select } from "d3-selection";
export {
  line,
  symbol,
  symbolCircle,
  symbolDiamond2,
  symbolSquare2,
  symbolTimes,
  symbolTriangle,
} from "d3-shape";
