// The charts of the check: one shot beside its neighbours and the image, numbers over the order of the shots, and the
// whole signal over the delays. Lines are told apart by weight and dashes, not by colour alone.

import * as Plot from "@observablehq/plot";
import type { Series, ShotView } from "../wire.gen";
import type { ChartElement } from "./chart";
import { plain, unitText } from "./number";

const margins = { marginTop: 14, marginRight: 8, marginBottom: 28, marginLeft: 46 };
const frame = { height: 140, ...margins, style: { fontSize: "10.5px", background: "none", overflow: "visible" } };
const axis = {
  tickSize: 3,
  tickPadding: 2,
  labelArrow: "none" as const,
  labelAnchor: "center" as const,
  tickFormat: (value: number) => plain(value),
};

const zeroLine = () => Plot.ruleY([0], { strokeOpacity: 0.35 });

function lines(x: number[], own: number[], others: number[][], broken: number[]) {
  const at = (_: unknown, i: number) => x[i];
  return [
    zeroLine(),
    ...others.map((values) => Plot.lineY(values, { x: at, strokeWidth: 1, strokeOpacity: 0.45 })),
    ...(broken.length > 0 ? [Plot.lineY(broken, { x: at, strokeWidth: 1.4, strokeDasharray: "5 3" })] : []),
    Plot.lineY(own, { x: at, strokeWidth: 2, stroke: "var(--dye)" }),
  ];
}

/** Draws the real part of the shot's trace over those of its neighbours. */
export function shotTraceChart({ timeNS, real, neighbours }: ShotView, width: number): ChartElement {
  return Plot.plot({
    ...frame,
    width,
    x: { ...axis, ticks: 5, label: "time from k = 0 in ns" },
    y: { ...axis, ticks: 4, label: null },
    marks: lines(
      timeNS,
      real,
      neighbours.map((n) => n.real),
      [],
    ),
  });
}

/** Draws the shot's projection over those of its neighbours, and broken what the image would have given. */
export function shotProjectionChart({ positionMM, projection, neighbours, fromImage }: ShotView, width: number): ChartElement {
  return Plot.plot({
    ...frame,
    width,
    x: { ...axis, ticks: 5, label: "position along the gradient in mm" },
    y: { ...axis, ticks: 4, label: null },
    marks: lines(
      positionMM,
      projection,
      neighbours.map((n) => n.projection),
      fromImage,
    ),
  });
}

/** Draws a number of every kept shot over the order of the shots, with the chosen shot marked. */
export function seriesChart(shots: number[], { label, unit, values }: Series, chosen: number, width: number): ChartElement {
  const x = (_: unknown, i: number) => shots[i];
  return Plot.plot({
    ...frame,
    width,
    x: { ...axis, ticks: 6, label: "shot, in the order of acquisition" },
    y: { ...axis, ticks: 4, label: null },
    ariaLabel: `${label} ${unitText(unit)}`,
    marks: [
      Plot.ruleX([chosen], { strokeOpacity: 0.6, strokeDasharray: "2 2" }),
      Plot.dotY(values, { x, r: 1.6, fill: "currentColor", fillOpacity: 0.7 }),
    ],
  });
}

/** Draws the signal of the whole object over the delays. */
export function curveChart(delayUS: number[], curve: number[], width: number): ChartElement {
  const x = (_: unknown, i: number) => delayUS[i];
  return Plot.plot({
    ...frame,
    width,
    x: { ...axis, ticks: 5, label: "delay in µs" },
    y: { ...axis, ticks: 4, label: null },
    marks: [
      zeroLine(),
      Plot.lineY(curve, { x, strokeWidth: 1, strokeOpacity: 0.6 }),
      Plot.dotY(curve, { x, r: 2, fill: "currentColor" }),
    ],
  });
}
