// The values at the cursor in words: a value with its error and unit, or the reason why there is none.

import { fateOf } from "../../draw/fate";
import { centreOf, indexOf, insideFieldOfView, sameGrid, voxelAt, type Grid } from "../../draw/grid";
import { fixed, plain, unitText, withError } from "../../draw/number";
import { acquisition } from "../../store/acquisition";
import type { Strand } from "../../store/strand";
import { cursorMM, frameIndex, frameShown } from "../../store/view";
import type { Quantity } from "../../draw/colour";

/** Returns one sentence on the voxel under the cursor, in parts: its place, and its value in each map. */
export function readoutOf(strand: Strand): string[] {
  const grid = strand.images.value?.grid;
  if (!grid) return [];
  const voxel = voxelAt(grid, cursorMM.value);
  const [x, y, z] = centreOf(grid, voxel).map((mm) => fixed(mm, 1));
  const place = `voxel ${voxel.join(", ")} at x ${x}, y ${y}, z ${z} mm`;
  const { timeUS, rateName } = strand.plan.value?.frames ?? { timeUS: [], rateName: "rate" };
  const us = plain(timeUS[frameIndex(timeUS)] ?? 0, 4);
  return [
    `${place}:`,
    `amplitude at ${us} µs ${valueAt(strand, "amplitude")};`,
    `${rateName} ${valueAt(strand, "rate")};`,
    `pO₂ ${valueAt(strand, "pO2")}`,
  ];
}

/** Returns the value of a map under the cursor with error and unit, or why there is none. */
export function valueAt(strand: Strand, quantity: Quantity): string {
  return { amplitude: amplitudeAt, rate: rateAt, pO2: pO2At }[quantity](strand);
}

/** Returns the unit of an amplitude image: signal per volume, or per area in 2D. */
export function amplitudeUnit(): string {
  return acquisition.value?.dim === 2 ? "/mm²" : "/mm³";
}

function amplitudeAt({ images }: Strand): string {
  const shown = images.value;
  const values = frameShown(shown);
  if (!shown || !values) return "not made yet";
  const index = cursorIndex(shown.grid);
  if (!insideFieldOfView(shown.grid, voxelAt(shown.grid, cursorMM.value))) return "outside the field of view";
  return `${withError(values[index], shown.noiseSD[frameIndex(shown.timeUS)])} ${amplitudeUnit()}`;
}

function rateAt(strand: Strand): string {
  const rates = strand.rates.value;
  if (!rates) return "not fitted yet";
  const reason = reasonAt(strand, rates.grid);
  if (reason) return reason;
  const index = cursorIndex(rates.grid);
  if (!Number.isFinite(rates.rate[index])) return "no answer";
  return `${withError(rates.rate[index], rates.rateSE[index])} ${unitText("1/us")}`;
}

function pO2At(strand: Strand): string {
  const oxygen = strand.oxygen.value;
  if (!oxygen) return "not made yet";
  if (!oxygen.pO2 || !oxygen.pO2SE) return "needs a calibration";
  const reason = reasonAt(strand, oxygen.grid);
  if (reason) return reason;
  const index = cursorIndex(oxygen.grid);
  return `${withError(oxygen.pO2[index], oxygen.pO2SE[index])} torr`;
}

/** Returns why the voxel under the cursor has no value, or "". */
function reasonAt({ oxygen }: Strand, grid: Grid): string {
  const shown = oxygen.value;
  if (!shown || !sameGrid(shown.grid, grid)) return "";
  return fateOf(shown.fate[cursorIndex(grid)]).words;
}

function cursorIndex(grid: Grid): number {
  return indexOf(grid, voxelAt(grid, cursorMM.value));
}
