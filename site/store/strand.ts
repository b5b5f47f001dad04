// A strand is one variant: a recipe applied to the open acquisition, with the state of its stages and what is shown
// of its results. Strands stack; everything about one of them is in its own object.

import { computed, signal, type ReadonlySignal, type Signal } from "@preact/signals";
import type { Grid } from "../draw/grid";
import type { Fault, Plan, Recipe, Requests } from "../wire.gen";
import { hello } from "./engine";
import { History } from "./history";
import { sameValue, valueAt } from "./recipe";

export const stageNames = ["plan", "measure", "reconstruct", "fit", "derive"] as const;

export type StageName = (typeof stageNames)[number];

export type StageState =
  | { state: "waiting" }
  | { state: "working"; fraction: number; coarse?: boolean }
  | { state: "done"; seconds: number; reused: boolean }
  | { state: "failed"; fault: Fault };

/** What every result says about itself. */
export interface Made {
  /** Key of the stage and of all settings that reach it. */
  key: string;
  /** Of a coarse result: the key of the full one that it stands in for until that one is made. */
  standsFor?: string;
  grid: Grid;
}

/** The images of the frames: delays, or sample times of single-point data. One value per voxel, x-fastest. */
export interface Images extends Made {
  timeUS: number[];
  frames: Float32Array<ArrayBuffer>[];
  noiseSD: number[];
}

export interface Rates extends Made {
  rate: Float32Array<ArrayBuffer>;
  rateSE: Float32Array<ArrayBuffer>;
  amplitude: Float32Array<ArrayBuffer>;
  amplitudeSE: Float32Array<ArrayBuffer>;
  chiSquare: Float32Array<ArrayBuffer>;
  status: Uint8Array<ArrayBuffer>;
}

/** Fates and pO2 of the voxels; pO2 and its error are null without a calibration. */
export interface Oxygen extends Made {
  fate: Uint8Array<ArrayBuffer>;
  pO2: Float32Array<ArrayBuffer> | null;
  pO2SE: Float32Array | null;
  derived: Derived;
}

/** The numbers of a derived map. */
export type Derived = Requests["derive"]["reply"];

export interface Strand {
  id: number;
  name: Signal<string>;
  defaults: Recipe;
  recipe: Signal<Recipe>;
  history: History<Recipe>;
  stages: Record<StageName, Signal<StageState>>;
  /** The last plan that held, and the recipe that it was made of. */
  plan: Signal<Plan | null>;
  planned: Signal<Recipe | null>;
  images: Signal<Images | null>;
  rates: Signal<Rates | null>;
  oxygen: Signal<Oxygen | null>;
  warnings: Signal<string[]>;
  /** What the plan said against the recipe as it stands; null when it holds. */
  recipeFault: ReadonlySignal<Fault | null>;
  /** Counts the runs, so that an older one knows that it has been overtaken. */
  run: number;
}

export const strands = signal<Strand[]>([]);

export function makeStrand(id: number, name: string, defaults: Recipe): Strand {
  const stages = Object.fromEntries(stageNames.map((name) => [name, signal<StageState>({ state: "waiting" })]));
  const strand: Omit<Strand, "recipeFault"> = {
    id,
    name: signal(name),
    defaults,
    recipe: signal(defaults),
    history: new History<Recipe>(),
    stages: stages as Strand["stages"],
    plan: signal(null),
    planned: signal(null),
    images: signal(null),
    rates: signal(null),
    oxygen: signal(null),
    warnings: signal([]),
    run: 0,
  };
  const { plan } = strand.stages;
  return { ...strand, recipeFault: computed(() => (plan.value.state === "failed" ? plan.value.fault : null)) };
}

export type ShownStage = "reconstruct" | "fit" | "derive";

function shownOf(strand: Strand, stage: ShownStage): Made | null {
  return { reconstruct: strand.images, fit: strand.rates, derive: strand.oxygen }[stage].value;
}

/** Tells whether what a stage shows was made with other settings than those that stand now. */
export function isOlder(strand: Strand, stage: ShownStage): boolean {
  const shown = shownOf(strand, stage);
  if (!shown) return false;
  const key = shown.standsFor ?? shown.key;
  return strand.plan.value?.keys[stage] !== key || unplannedStages(strand).some((one) => reaches(one, stage));
}

/** Tells whether what a stage shows is coarse, in place of a full result that is not there yet. */
export function isCoarse(strand: Strand, stage: ShownStage): boolean {
  return shownOf(strand, stage)?.standsFor !== undefined;
}

/** Returns the first stages that the changes since the last plan reach, one per changed setting. */
function unplannedStages({ recipe, planned }: Strand): StageName[] {
  const [now, before] = [recipe.value, planned.value];
  if (!before || now === before) return [];
  const changed = (hello.value?.catalogue ?? []).filter(({ path }) => !sameValue(valueAt(now, path), valueAt(before, path)));
  return changed.map(({ stage }) => stage as StageName);
}

/** Tells whether a change at one stage alters the result of another. */
function reaches(changed: StageName, stage: StageName): boolean {
  return stageNames.indexOf(changed) <= stageNames.indexOf(stage);
}
