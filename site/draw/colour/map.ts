// A colour map is a row of stops in OKLCH. Every map rises in lightness from its first stop to its last, by at least
// 0.75, so that the order of values survives printing in grey and every common kind of colour vision.

import { bytesOf, labOf, type Lab } from "./oklch";

export type Quantity = "amplitude" | "rate" | "pO2";

export interface Stop {
  lightness: number;
  chroma: number;
  hue: number;
}

export interface ColourMap {
  name: string;
  quantity: Quantity;
  stops: Stop[];
}

/** Entries of a colour table: fine enough that no step is seen. */
export const tableSize = 1024;

/** Points at which the path through OKLab is measured; between them it is taken as straight. */
const pathPoints = 256;

/**
 * Returns the table of a map as packed pixels (red in the lowest byte, opaque). Entries are spaced evenly along the
 * path through OKLab, so that equal differences of the value look equally large.
 */
export function tableOf(map: ColourMap): Uint32Array {
  const path = pathOf(map.stops, pathPoints);
  const run = lengthsAlong(path);
  const table = new Uint32Array(tableSize);
  for (let i = 0, at = 0; i < tableSize; i++) {
    const wanted = (run[pathPoints - 1] * i) / (tableSize - 1);
    while (at < pathPoints - 2 && run[at + 1] < wanted) at++;
    table[i] = packed(mixed(path[at], path[at + 1], (wanted - run[at]) / (run[at + 1] - run[at])));
  }
  return table;
}

function mixed(from: Lab, to: Lab, share: number): Lab {
  return [0, 1, 2].map((c) => from[c] + (to[c] - from[c]) * share) as Lab;
}

function packed(lab: Lab): number {
  const [r, g, b] = bytesOf(lab);
  return ((255 << 24) | (b << 16) | (g << 8) | r) >>> 0;
}

function pathOf(stops: Stop[], points: number): Lab[] {
  const path: Lab[] = [];
  for (let i = 0; i < points; i++) {
    const place = (i / (points - 1)) * (stops.length - 1);
    const at = Math.min(Math.floor(place), stops.length - 2);
    path.push(between(stops[at], stops[at + 1], place - at));
  }
  return path;
}

function between(from: Stop, to: Stop, share: number): Lab {
  const mix = (a: number, b: number) => a + (b - a) * share;
  return labOf(mix(from.lightness, to.lightness), mix(from.chroma, to.chroma), mix(from.hue, to.hue));
}

function lengthsAlong(path: Lab[]): Float64Array {
  const run = new Float64Array(path.length);
  for (let i = 1; i < path.length; i++) {
    const [l0, a0, b0] = path[i - 1];
    const [l1, a1, b1] = path[i];
    run[i] = run[i - 1] + Math.hypot(l1 - l0, a1 - a0, b1 - b0);
  }
  return run;
}
