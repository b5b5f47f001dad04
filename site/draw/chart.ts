// The charts of the page. Each is a function of its data and a width in pixels.

import * as Plot from "@observablehq/plot";
import type { Summary, Traces } from "../wire.gen";
import { plain } from "./number";
import { tableFor, tableSize, type Quantity } from "./colour";
import { ticksOf, type Window } from "./window";

export type ChartElement = SVGSVGElement | HTMLElement;

const height = 116;
const margins = { marginTop: 14, marginRight: 8, marginBottom: 28, marginLeft: 42 };
export const frame = { height, ...margins, style: { fontSize: "10.5px", background: "none", overflow: "visible" } };
export const axis = {
  tickSize: 3,
  tickPadding: 2,
  labelArrow: "none" as const,
  labelAnchor: "center" as const,
  tickFormat: (value: number) => plain(value),
};

function zeroLine() {
  return Plot.ruleY([0], { strokeOpacity: 0.35 });
}

/** Draws a phased trace: the real part as a full line, the imaginary part broken. */
export function traceChart({ timeNS, real, imag }: Traces, width: number): ChartElement {
  const at = (_: unknown, i: number) => timeNS[i];
  return Plot.plot({
    ...frame,
    width,
    x: { ...axis, ticks: 5, label: "time from k = 0 in ns" },
    y: { ...axis, ticks: 4, label: null },
    marks: [
      zeroLine(),
      Plot.lineY(imag, { x: at, strokeWidth: 1, strokeDasharray: "3 2", strokeOpacity: 0.7 }),
      Plot.lineY(real, { x: at, strokeWidth: 1.4 }),
    ],
  });
}

export function projectionChart({ positionMM, projection }: Traces, width: number): ChartElement {
  return Plot.plot({
    ...frame,
    width,
    x: { ...axis, ticks: 5, label: "position along the gradient in mm" },
    y: { ...axis, ticks: 4, label: null },
    marks: [zeroLine(), Plot.lineY(projection, { x: (_: unknown, i: number) => positionMM[i], strokeWidth: 1.4 })],
  });
}

/** Draws the height of the echo over the delays, with the shown delay marked. */
export function delayChart({ delayUS, echoHeight }: Traces, shown: number, width: number): ChartElement {
  const x = (_: unknown, i: number) => delayUS[i];
  return Plot.plot({
    ...frame,
    width,
    x: { ...axis, ticks: 5, label: "delay in µs" },
    y: { ...axis, ticks: 4, label: null },
    marks: [
      zeroLine(),
      Plot.ruleX([delayUS[shown]], { strokeOpacity: 0.5, strokeDasharray: "2 2" }),
      Plot.lineY(echoHeight, { x, strokeWidth: 1, strokeOpacity: 0.6 }),
      Plot.dotY(echoHeight, { x, r: 2, fill: "currentColor" }),
    ],
  });
}

export interface HistogramLook {
  quantity: Quantity;
  window: Window;
  label: string;
  /** Thresholds; what lies at or below them is shaded and named. */
  marks: number[];
  width: number;
}

/** Draws how many voxels have which value, each bar in the colour that the map gives it. */
export function histogramChart({ edges, counts }: Summary, look: HistogramLook): ChartElement {
  const bars = counts.map((count, i) => ({ from: edges[i], to: edges[i + 1], count }));
  const high = edges[edges.length - 1];
  const low = look.marks.length > 0 ? Math.min(edges[0], 0) : edges[0];
  const marks = look.marks.filter((mark) => mark <= high);
  return Plot.plot({
    ...frame,
    height: 150,
    marginTop: marks.length > 0 ? 26 : 8,
    width: look.width,
    x: { ...axis, domain: [low, high], ticks: ticksOf({ low, high }, 6), label: look.label },
    y: { ...axis, ticks: 4, label: null },
    marks: [
      Plot.rect(marks, { x1: low, x2: (mark: number) => mark, fill: "currentColor", fillOpacity: 0.09 }),
      Plot.ruleX(marks, { strokeWidth: 0.75, strokeDasharray: "3 2", insetTop: -4 }),
      markNames(
        marks.filter((_, i) => i % 2 === 0),
        -6,
      ),
      markNames(
        marks.filter((_, i) => i % 2 === 1),
        -16,
      ),
      Plot.rectY(bars, { x1: "from", x2: "to", y: "count", fill: (bar) => colourAt(look, bar), ...barOutline }),
      Plot.ruleY([0]),
    ],
  });
}

const barOutline = { stroke: "currentColor", strokeWidth: 0.5, strokeOpacity: 0.55 };

/** Names marks above the frame. Neighbours stand on different lines, so that they do not touch. */
function markNames(marks: number[], dy: number) {
  return Plot.text(marks, {
    x: (mark: number) => mark,
    frameAnchor: "top",
    text: String,
    dy,
    lineAnchor: "bottom",
  });
}

function colourAt({ quantity, window }: HistogramLook, bar: { from: number; to: number }) {
  const share = ((bar.from + bar.to) / 2 - window.low) / (window.high - window.low || 1);
  const entry = Math.min(Math.max(Math.round(share * (tableSize - 1)), 0), tableSize - 1);
  const pixel = tableFor(quantity)[entry];
  return `rgb(${pixel & 255} ${(pixel >> 8) & 255} ${(pixel >> 16) & 255})`;
}
