// The flow through one strand: plan, measure, reconstruct, fit, derive. A stage whose key did not change is taken from
// the cache. A change of a setting overtakes the older run; what that run is computing is given up when the change
// reaches it, and joined when it does not.

import { Cancelled } from "../engine/fault";
import type { Measured, Plan, Recipe } from "../wire.gen";
import { Cache } from "./cache";
import { engine } from "./engine";
import { faultOf } from "./fault";
import { openingSettled } from "./opening";
import { askPlan, derive, fit, measure, reconstruct, type Tell } from "./stages";
import { textOf } from "./recipe";
import { stageNames, type Images, type Oxygen, type Rates, type StageName, type Strand } from "./strand";

const mebi = 2 ** 20;

const caches = {
  measure: new Cache<Measured>(mebi),
  reconstruct: new Cache<Images>(512 * mebi),
  fit: new Cache<Rates>(256 * mebi),
  derive: new Cache<Oxygen>(256 * mebi),
};

interface UnderWay {
  strand: Strand;
  stage: StageName;
  result: Promise<unknown>;
}

/** Stages being computed now, by key, so that a newer run can wait for one instead of starting it again. */
const underWay = new Map<string, UnderWay>();

/** Stages long enough that giving one up is worth new workers. */
const longStages: StageName[] = ["reconstruct", "fit"];

/** Thrown when a run finds that a newer one has taken its place. */
class Overtaken extends Error {}

/** Runs a strand with its recipe as it stands. The change reached no stage before changedStage. */
export function rerun(strand: Strand, changedStage: StageName): void {
  const run = ++strand.run;
  const reached = longStages.filter((stage) => stageNames.indexOf(stage) >= stageNames.indexOf(changedStage));
  if ([...underWay.values()].some((one) => one.strand === strand && reached.includes(one.stage))) engine().cancel();
  void follow(strand, run);
}

/** Forgets all results, because another acquisition is open. */
export function forgetResults(): void {
  for (const cache of Object.values(caches)) cache.clear();
  underWay.clear();
}

async function follow(strand: Strand, run: number): Promise<void> {
  try {
    await chain(strand, run);
  } catch (error) {
    if (!(error instanceof Overtaken)) throw error;
  }
}

async function chain(strand: Strand, run: number): Promise<void> {
  const plan = await planned(strand, run);
  if (!plan) return;
  const at = { strand, run };
  const measured = await stage(
    at,
    "measure",
    plan,
    (tell) => measure(plan, tell),
    () => 1,
  );
  if (!measured) return;
  const images = await stage(at, "reconstruct", plan, (t) => reconstruct(plan, measured.constants, t), imageBytes);
  if (!images) return;
  strand.images.value = images;
  const rates = await stage(at, "fit", plan, (tell) => fit(plan, images, tell), rateBytes);
  if (!rates) return;
  strand.rates.value = rates;
  const oxygen = await stage(at, "derive", plan, (tell) => derive(plan, images, rates, tell), oxygenBytes);
  if (!oxygen) return;
  strand.oxygen.value = oxygen;
  strand.warnings.value = [...plan.warnings, ...measured.warnings, ...oxygen.derived.warnings];
}

/** Checks the recipe. On a fault the stages keep what they show. */
async function planned(strand: Strand, run: number): Promise<Plan | null> {
  const recipe = strand.recipe.value;
  const began = performance.now();
  const at = { strand, run };
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

interface At {
  strand: Strand;
  run: number;
}

type LaterStage = Exclude<StageName, "plan">;
type Kept = typeof caches;
type Of<Name extends keyof Kept> = Kept[Name] extends Cache<infer Value> ? Value : never;

/** Returns the result of one stage: kept, under way, or made now. Returns null when the stage failed. */
async function stage<Name extends keyof Kept>(
  at: At,
  name: Name,
  plan: Plan,
  make: (tell: Tell) => Promise<Of<Name>>,
  bytesOf: (value: Of<Name>) => number,
): Promise<Of<Name> | null> {
  const key = plan.keys[name];
  const cache = caches[name] as unknown as Cache<Of<Name>>;
  const kept = cache.get(key);
  if (kept) {
    at.strand.stages[name].value = { state: "done", seconds: 0, reused: true };
    return kept;
  }
  const began = performance.now();
  at.strand.stages[name].value = { state: "working", fraction: 0 };
  const makeAndKeep = async () => {
    const value = await make(teller(at.strand, name, key));
    cache.put(key, value, bytesOf(value));
    return value;
  };
  try {
    const value = await patiently(at, () => joined(at.strand, name, key, makeAndKeep));
    at.strand.stages[name].value = { state: "done", seconds: since(began), reused: false };
    return value;
  } catch (error) {
    fail(at, name, error);
    return null;
  }
}

function joined<Value>(strand: Strand, stage: StageName, key: string, make: () => Promise<Value>): Promise<Value> {
  const known = underWay.get(key);
  if (known) return known.result as Promise<Value>;
  const result = make().finally(() => {
    if (underWay.get(key)?.result === result) underWay.delete(key);
  });
  underWay.set(key, { strand, stage, result });
  return result;
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

function teller(strand: Strand, name: LaterStage, key: string): Tell {
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

function imageBytes({ frames }: Images): number {
  return frames.reduce((sum, image) => sum + image.byteLength, 0);
}

function rateBytes({ rate }: Rates): number {
  return rate.byteLength * 4 + rate.length;
}

function oxygenBytes({ fate, pO2 }: Oxygen): number {
  return fate.byteLength + (pO2 ? 2 * pO2.byteLength : 0);
}
