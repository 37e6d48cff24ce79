// What a report page uses for charts (Observable Plot) and for zooming a canvas (d3).
export {
  axisX,
  axisY,
  barX,
  dot,
  gridX,
  gridY,
  line,
  plot,
  pointer,
  pointerX,
  rect,
  ruleX,
  ruleY,
  text,
  tickX,
  tickY,
  tip,
} from "@observablehq/plot";
export { interpolateCividis } from "d3-scale-chromatic";
export { pointer as pointerAt, select } from "d3-selection";
export { zoom, zoomIdentity } from "d3-zoom";
