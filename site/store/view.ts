// What all strands share: plane, cursor, slice (the cursor's place across the plane), the frame of the amplitude image,
// and the windows of the colour scales.

import { computed, signal, type Signal } from "@preact/signals";
import type { Quantity } from "../draw/colour";
import { axesOf, centreOf, voxelAt, type Grid, type Plane, type Triple } from "../draw/grid";
import { quantileOfBins, quantilesOf, rounded, type Window } from "../draw/window";
import { strands, type Images } from "./strand";

export const plane = signal<Plane>("xy");
export const cursorMM = signal<Triple>([0, 0, 0]);

/** Delay or sample time of the amplitude image; a strand without that one shows the nearest it has. */
export const frameUS = signal(0);
export const shot = signal(0);

/** Windows that a person has set; null means automatic. */
export const setWindows: Record<Quantity, Signal<Window | null>> = {
  amplitude: signal(null),
  rate: signal(null),
  pO2: signal(null),
};

/** Whether the automatic window of the amplitude image is one for all frames, so that their signs can be compared. */
export const oneWindowForFrames = signal(false);

const automatic = {
  amplitude: computed(() => amplitudeWindow(strands.value[0]?.images.value ?? null)),
  rate: computed(() => {
    const summary = strands.value[0]?.oxygen.value?.derived.rate;
    if (!summary?.count) return { low: 0, high: 1 };
    const { edges, counts } = summary;
    return rounded(quantileOfBins(edges, counts, 0.01), quantileOfBins(edges, counts, 0.99));
  }),
  pO2: computed(() => {
    const summary = strands.value[0]?.oxygen.value?.derived.pO2;
    return summary?.count ? rounded(0, quantileOfBins(summary.edges, summary.counts, 0.99)) : { low: 0, high: 60 };
  }),
};

const windows = {
  amplitude: computed(() => setWindows.amplitude.value ?? automatic.amplitude.value),
  rate: computed(() => setWindows.rate.value ?? automatic.rate.value),
  pO2: computed(() => setWindows.pO2.value ?? automatic.pO2.value),
};

/** Returns the window that a quantity is drawn with in every strand. */
export function windowOf(quantity: Quantity): Window {
  return windows[quantity].value;
}

function amplitudeWindow(images: Images | null): Window {
  const one = frameShown(images);
  const shown = oneWindowForFrames.value ? images?.frames : one && [one];
  if (!shown?.length) return { low: 0, high: 1 };
  const ranges = shown.map((image) => quantilesOf(image, 0.005, 0.995));
  const low = Math.min(...ranges.map(([p]) => p));
  const high = Math.max(...ranges.map(([, q]) => q));
  return rounded(low, high);
}

/** Puts everything shared back for a newly opened acquisition; the frame follows from its first plan. */
export function showFromTheStart(): void {
  plane.value = "xy";
  cursorMM.value = [0, 0, 0];
  shot.value = 0;
  for (const window of Object.values(setWindows)) window.value = null;
}

/** Puts the cursor on the centre of a voxel. */
export function pointAt(grid: Grid, voxel: Triple): void {
  cursorMM.value = centreOf(grid, voxel);
}

/** Moves the cursor by whole voxels of a grid, to its border at most. */
export function moveCursor(grid: Grid, axis: 0 | 1 | 2, voxels: number): void {
  const voxel = voxelAt(grid, cursorMM.value);
  voxel[axis] = Math.min(Math.max(voxel[axis] + voxels, 0), grid.n[axis] - 1);
  pointAt(grid, voxel);
}

export function moveSlice(grid: Grid, slices: number): void {
  moveCursor(grid, axesOf(plane.value).w, slices);
}

/** Returns the place of the frame to show among some. */
export function frameIndex(timeUS: number[]): number {
  const distances = timeUS.map((us) => Math.abs(us - frameUS.value));
  return distances.indexOf(Math.min(...distances));
}

/** Returns the image of the frame to show, or null. */
export function frameShown(images: Images | null): Float32Array<ArrayBuffer> | null {
  return images?.frames[frameIndex(images.timeUS)] ?? null;
}

/** Shows another frame, by its place in the order of the first strand. */
export function moveFrame(by: number): void {
  const times = strands.value[0]?.plan.value?.frames.timeUS ?? [];
  const at = Math.min(Math.max(frameIndex(times) + by, 0), times.length - 1);
  if (at >= 0) frameUS.value = times[at];
}
