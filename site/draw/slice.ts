// One slice of a volume as pixels, one pixel per voxel. The first row of the image is the largest v, so that the
// second axis of the plane points up on the screen.

import { tableSize } from "./colour";
import { fateOf, type Treatment } from "./fate";
import { axesOf, stridesOf, type Grid, type Plane } from "./grid";
import type { Window } from "./window";

export interface SliceOf {
  grid: Grid;
  plane: Plane;
  /** Index of the slice along the axis that is perpendicular to the plane. */
  at: number;
}

export interface Painted {
  pixels: ImageData;
  /** Column and row of the voxels that are drawn with a pattern instead of a colour. */
  hatched: [column: number, row: number][];
  negative: [column: number, row: number][];
  coloured: number;
  clippedLow: number;
  clippedHigh: number;
}

export interface Colouring {
  values: Float32Array;
  /** Fates of the voxels; null draws every finite value in colour. */
  fate: Uint8Array | null;
  window: Window;
  table: Uint32Array;
  masked: number;
  negative: number;
  /** Whether voxels of negative pO2 are drawn apart. */
  negatives: boolean;
}

/** Calls visit with the array index, column and row of every voxel of a slice, row by row from the top. */
export function walk({ grid, plane, at }: SliceOf, visit: (index: number, column: number, row: number) => void): void {
  const { u, v, w } = axesOf(plane);
  const strides = stridesOf(grid);
  for (let row = 0; row < grid.n[v]; row++) {
    const start = at * strides[w] + (grid.n[v] - 1 - row) * strides[v];
    for (let column = 0; column < grid.n[u]; column++) visit(start + column * strides[u], column, row);
  }
}

/** Returns the pixels of a slice and what cannot be said by colour. */
export function paint(slice: SliceOf, how: Colouring): Painted {
  const { u, v } = axesOf(slice.plane);
  const painted = blank(slice.grid.n[u], slice.grid.n[v]);
  const pixels = new Uint32Array(painted.pixels.data.buffer);
  walk(slice, (index, column, row) => {
    const treatment = treatmentOf(how, index);
    const at = row * painted.pixels.width + column;
    if (treatment === "colour") pixels[at] = colourOf(how, how.values[index], painted);
    else if (treatment === "masked") pixels[at] = how.masked;
    else if (treatment === "hatch") painted.hatched.push([column, row]);
    else if (treatment === "negative") {
      pixels[at] = how.negative;
      painted.negative.push([column, row]);
    }
  });
  return painted;
}

function blank(width: number, height: number): Painted {
  const pixels = new ImageData(width, height);
  return { pixels, hatched: [], negative: [], coloured: 0, clippedLow: 0, clippedHigh: 0 };
}

function treatmentOf(how: Colouring, index: number): Treatment {
  const finite = Number.isFinite(how.values[index]);
  if (!how.fate) return finite ? "colour" : "paper";
  const { treatment } = fateOf(how.fate[index]);
  if (treatment === "negative" && !how.negatives) return "colour";
  return treatment === "colour" && !finite ? "hatch" : treatment;
}

function colourOf({ window, table }: Colouring, value: number, tally: Painted): number {
  tally.coloured++;
  if (value < window.low) tally.clippedLow++;
  if (value > window.high) tally.clippedHigh++;
  const share = (value - window.low) / (window.high - window.low || 1);
  return table[Math.min(Math.max(Math.round(share * (tableSize - 1)), 0), tableSize - 1)];
}
