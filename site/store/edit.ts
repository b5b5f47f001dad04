// Changes of a strand's recipe. The form follows at once; the run follows when typing has paused.

import type { Calibration, Recipe } from "../wire.gen";
import { acquisition } from "./acquisition";
import { sameValue, textOf, valueAt, withValue } from "./recipe";
import { rerun } from "./run";
import { stageNames, type StageName, type Strand } from "./strand";

const pauseMS = 150;

interface Due {
  stage: StageName;
  timer: ReturnType<typeof setTimeout>;
}

const due = new Map<Strand, Due>();

/** Changes one leaf of the recipe; stage is the first that the catalogue says is redone. */
export function setValue(strand: Strand, path: string, value: unknown, stage: StageName): void {
  if (sameValue(valueAt(strand.recipe.value, path), value)) return;
  change(strand, path, withValue(strand.recipe.value, path, value), stage);
}

/** Replaces the whole recipe. */
export function setRecipe(strand: Strand, recipe: Recipe): void {
  change(strand, "", recipe, "measure");
}

export function resetToDefaults(strand: Strand): void {
  setRecipe(strand, strand.defaults);
}

export function undo(strand: Strand): void {
  show(strand, strand.history.undo(strand.recipe.value));
}

export function redo(strand: Strand): void {
  show(strand, strand.history.redo(strand.recipe.value));
}

const lastCalibrations = new WeakMap<Strand, Calibration>();

/** Turns the conversion to pO2 on or off. Turned on again, it comes back as it was. */
export function setCalibrated(strand: Strand, on: boolean): void {
  const { calibration, ...rest } = strand.recipe.value;
  if (calibration) lastCalibrations.set(strand, calibration);
  const recipe = on ? { ...rest, calibration: firstCalibration(strand) } : rest;
  change(strand, "calibration", recipe as Recipe, "derive");
}

function firstCalibration(strand: Strand): Calibration {
  const rate = acquisition.value?.rateName ?? "R1";
  const blank = { rate, zeroPerUS: 0, slopePerUSPerTorr: 0 };
  return lastCalibrations.get(strand) ?? strand.defaults.calibration ?? blank;
}

function change(strand: Strand, leaf: string, recipe: Recipe, stage: StageName): void {
  if (textOf(recipe) === textOf(strand.recipe.value)) return;
  strand.history.note(leaf, strand.recipe.value);
  strand.recipe.value = recipe;
  runSoon(strand, stage);
}

function show(strand: Strand, recipe: Recipe | undefined): void {
  if (!recipe) return;
  strand.recipe.value = recipe;
  runSoon(strand, "measure");
}

/** Runs after a pause, from the earliest stage that any change since the last run reaches. */
function runSoon(strand: Strand, stage: StageName): void {
  const before = due.get(strand);
  if (before) clearTimeout(before.timer);
  const earliest = before ? stageNames[Math.min(stageNames.indexOf(before.stage), stageNames.indexOf(stage))] : stage;
  const timer = setTimeout(() => {
    due.delete(strand);
    rerun(strand, earliest);
  }, pauseMS);
  due.set(strand, { stage: earliest, timer });
}
