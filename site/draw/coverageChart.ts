// What single-point encoding covers and resolves: both fall as 1/t with the sample time.

import * as Plot from "@observablehq/plot";
import type { SampleTime } from "../wire.gen";
import { axis, frame, type ChartElement } from "./chart";

export interface CoverageLook {
  /** Diameter of the object, which a field of view has to hold. */
  extentMM: number;
  /** Sample times that the images are made from. */
  fromUS: number;
  toUS: number;
  width: number;
}

// A field of view of many times the object says nothing more, and would press the rest together.
const mostExtents = 4;

/** Draws field of view (full) and resolution (broken) over the sample times that give an image. */
export function coverageChart(times: SampleTime[], { extentMM, fromUS, toUS, width }: CoverageLook): ChartElement {
  const low = Math.min(...times.map((time) => time.resolutionMM));
  const high = Math.max(mostExtents * extentMM, low * 10);
  const shown = times.filter((time) => time.fieldOfViewMM <= high);
  return Plot.plot({
    ...frame,
    width,
    x: { ...axis, ticks: 5, label: "sample time in µs" },
    y: { ...axis, type: "log", domain: [low * 0.9, high], ticks: roundLengths(low, high), label: null },
    marks: [
      Plot.rect([0], { x1: fromUS, x2: toUS, fill: "currentColor", fillOpacity: 0.11 }),
      Plot.ruleX([fromUS, toUS], { strokeOpacity: 0.5, strokeWidth: 0.75 }),
      Plot.ruleY([extentMM], { strokeDasharray: "1 2" }),
      Plot.text([extentMM], { y: (mm: number) => mm, frameAnchor: "left", text: () => "object", dx: 3, dy: 7 }),
      Plot.lineY(shown, { x: "timeUS", y: "fieldOfViewMM", strokeWidth: 1.4 }),
      Plot.lineY(times, { x: "timeUS", y: "resolutionMM", strokeWidth: 1.2, strokeDasharray: "3 2" }),
    ],
  });
}

/** Returns 1, 2, 5, 10, ... between two lengths. */
function roundLengths(low: number, high: number): number[] {
  const all = [];
  for (let power = 10 ** Math.floor(Math.log10(low)); power <= high; power *= 10) all.push(power, 2 * power, 5 * power);
  return all.filter((mm) => mm >= low * 0.9 && mm <= high);
}
