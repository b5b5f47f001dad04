// The flow through one strand: plan, measure, reconstruct, fit, derive. A result whose key did not change is not made
// again. A change of a setting overtakes the older run; what that run is computing is given up when the change reaches
// it, and joined when it does not.

import { Cancelled } from "../engine/fault";
import type { Measured, Plan, Recipe } from "../wire.gen";
import { coarseOf, isWorthwhile, noteSeconds } from "./coarse";
import { faultOf } from "./fault";
import { openingSettled } from "./opening";
import { textOf } from "./recipe";
import { isUnderWay, keptResult, sharedResult, turnAway, type LaterStage, type Make, type ResultOf } from "./results";
import { askPlan, derive, fit, measure, reconstruct } from "./stages";
import { stageNames, strands, type Made, type StageName, type Strand } from "./strand";
import { frameUS } from "./view";

/** Stages long enough that giving one up is worth new workers. */
const longStages: StageName[] = ["reconstruct", "fit"];

/** Thrown when a run finds that a newer one has taken its place. */
class Overtaken extends Error {}

/** Runs a strand with its recipe as it stands. The change reached no stage before changedStage. */
export function rerun(strand: Strand, changedStage: StageName): void {
  if (!strands.peek().includes(strand)) return;
  const run = ++strand.run;
  turnAway(
    strand,
    longStages.filter((stage) => stageNames.indexOf(stage) >= stageNames.indexOf(changedStage)),
  );
  void follow(strand, run);
}

/** Ends the run of a strand that is no longer there. */
export function endRun(strand: Strand): void {
  strand.run++;
  turnAway(strand, stageNames);
}

async function follow(strand: Strand, run: number): Promise<void> {
  try {
    await chain({ strand, run });
  } catch (error) {
    if (!(error instanceof Overtaken)) throw error;
  }
}

/** One run of a strand. */
interface At {
  strand: Strand;
  run: number;
}

async function chain(at: At): Promise<void> {
  const { strand } = at;
  const plan = await planned(at);
  if (!plan) return;
  const measured = await stage(at, "measure", plan, (watch) => measure(plan, watch));
  if (!measured) return;
  await showCoarse(at, plan);
  const images = await stage(at, "reconstruct", plan, timed(plan, measured));
  if (!images) return;
  strand.images.value = images;
  const rates = await stage(at, "fit", plan, (watch) => fit(plan, images, watch));
  if (!rates) return;
  strand.rates.value = rates;
  const oxygen = await stage(at, "derive", plan, (watch) => derive(plan, images, rates, watch));
  if (!oxygen) return;
  strand.oxygen.value = oxygen;
  strand.warnings.value = [...plan.warnings, ...measured.warnings, ...oxygen.derived.warnings];
}

/** Shows a coarse result of every stage, if the full one will be long in coming. Its faults are left to the full run. */
async function showCoarse(at: At, full: Plan): Promise<void> {
  if (keptResult(full, "reconstruct") || isUnderWay(full, "reconstruct") || !isWorthwhile(full)) return;
  at.strand.stages.reconstruct.value = { state: "working", fraction: 0, coarse: true };
  try {
    await coarseChain(at, full);
  } catch (error) {
    if (error instanceof Overtaken) throw error;
  }
}

async function coarseChain(at: At, full: Plan): Promise<void> {
  const { strand } = at;
  const plan = await patiently(at, () => askPlan(textOf(coarseOf(full.recipe))));
  const measured = await result(at, "measure", plan, (watch) => measure(plan, watch));
  const images = await result(at, "reconstruct", plan, timed(plan, measured));
  strand.images.value = inPlaceOf(full.keys.reconstruct, images);
  const rates = await result(at, "fit", plan, (watch) => fit(plan, images, watch));
  strand.rates.value = inPlaceOf(full.keys.fit, rates);
  const oxygen = await result(at, "derive", plan, (watch) => derive(plan, images, rates, watch));
  strand.oxygen.value = inPlaceOf(full.keys.derive, oxygen);
}

function inPlaceOf<Result extends Made>(standsFor: string, result: Result): Result {
  return { ...result, standsFor };
}

/** Returns the making of images, which notes how long it took. */
function timed(plan: Plan, { constants }: Measured): Make<"reconstruct"> {
  return async (watch) => {
    const began = performance.now();
    const images = await reconstruct(plan, constants, watch);
    noteSeconds(plan, since(began));
    return images;
  };
}

/** Checks the recipe. On a fault the stages keep what they show. */
async function planned(at: At): Promise<Plan | null> {
  const { strand } = at;
  const recipe = strand.recipe.value;
  const began = performance.now();
  try {
    const plan = await patiently(at, () => askPlan(textOf(recipe)));
    accept(strand, plan, recipe);
    strand.stages.plan.value = { state: "done", seconds: since(began), reused: false };
    return plan;
  } catch (error) {
    fail(at, "plan", error);
    settle(strand, (name) => strand.stages[name].value.state === "working");
    return null;
  }
}

function accept(strand: Strand, plan: Plan, recipe: Recipe): void {
  const before = strand.plan.value?.keys;
  if (!before) frameUS.value = plan.frames.timeUS[plan.frames.reference];
  strand.plan.value = plan;
  strand.planned.value = recipe;
  settle(strand, (name) => before?.[name] !== plan.keys[name]);
}

/** Sets those later stages to waiting that match. */
function settle(strand: Strand, matches: (name: LaterStage) => boolean): void {
  for (const name of stageNames) {
    if (name !== "plan" && matches(name)) strand.stages[name].value = { state: "waiting" };
  }
}

/** Returns the result of one stage and shows how it comes about. Returns null when the stage failed. */
async function stage<Name extends LaterStage>(
  at: At,
  name: Name,
  plan: Plan,
  make: Make<Name>,
): Promise<ResultOf<Name> | null> {
  const shown = at.strand.stages[name];
  const reused = keptResult(plan, name) !== undefined;
  const began = performance.now();
  if (!reused) shown.value = { state: "working", fraction: 0 };
  try {
    const value = await result(at, name, plan, make);
    shown.value = { state: "done", seconds: reused ? 0 : since(began), reused };
    return value;
  } catch (error) {
    fail(at, name, error);
    return null;
  }
}

/** Returns the result of one stage: kept, under way, or made now. */
async function result<Name extends LaterStage>(
  at: At,
  name: Name,
  plan: Plan,
  make: Make<Name>,
): Promise<ResultOf<Name>> {
  const tell = teller(at.strand, name, plan.keys[name]);
  return keptResult(plan, name) ?? patiently(at, () => sharedResult(at.strand, plan, name, make, tell));
}

/** Awaits work, and starts it again when it was cancelled on behalf of somebody else. Throws Overtaken. */
async function patiently<Value>(at: At, work: () => Promise<Value>): Promise<Value> {
  for (;;) {
    try {
      const value = await work();
      if (at.strand.run !== at.run) throw new Overtaken();
      return value;
    } catch (error) {
      if (at.strand.run !== at.run) throw new Overtaken();
      if (!(error instanceof Cancelled)) throw error;
      await openingSettled();
      if (at.strand.run !== at.run) throw new Overtaken();
    }
  }
}

/** Returns what shows the fraction of a stage, as long as the strand still waits for just that result. */
function teller(strand: Strand, name: LaterStage, key: string): (fraction: number) => void {
  return (fraction) => {
    const shown = strand.stages[name];
    const wanted = strand.plan.value?.keys[name] === key;
    if (wanted && shown.value.state === "working") shown.value = { state: "working", fraction };
  };
}

function fail({ strand, run }: At, name: StageName, error: unknown): void {
  if (error instanceof Overtaken || strand.run !== run) throw new Overtaken();
  strand.stages[name].value = { state: "failed", fault: faultOf(error) };
}

function since(began: number): number {
  return (performance.now() - began) / 1000;
}
