// A first look while the full run takes its time: half the matrix and, for spokes, the fastest method. It is made only
// where it is worth its own time.

import type { Plan, Recipe } from "../wire.gen";

// A person takes less than this for at once.
const quickSeconds = 0.3;
// The full image comes later by what the coarse one takes; more than this share of its own time would be felt.
const mostShare = 0.25;
// Half of a smaller matrix shows no more than blocks.
const leastMatrix = 24;

const secondsTaken = new Map<string, number>();

/** Notes how long a reconstruction took. */
export function noteSeconds(plan: Plan, seconds: number): void {
  secondsTaken.set(sizeOf(plan.recipe, plan), seconds);
}

/** Tells whether a coarse image is worth making before the full one, as far as is known. */
export function isWorthwhile(plan: Plan): boolean {
  if (plan.recipe.reconstruction.matrix < leastMatrix) return false;
  const full = secondsTaken.get(sizeOf(plan.recipe, plan));
  const coarse = secondsTaken.get(sizeOf(coarseOf(plan.recipe), plan));
  if (full === undefined) return true;
  return full > quickSeconds && !(coarse !== undefined && coarse > mostShare * full);
}

/** Returns the recipe of the coarse image. */
export function coarseOf(recipe: Recipe): Recipe {
  const { reconstruction } = recipe;
  const method = reconstruction.method === "single-point" ? "single-point" : "gridding";
  return { ...recipe, reconstruction: { ...reconstruction, method, matrix: Math.ceil(reconstruction.matrix / 2) } };
}

function sizeOf({ reconstruction }: Recipe, { frames }: Plan): string {
  return [reconstruction.method, reconstruction.matrix, frames.timeUS.length].join(" ");
}
