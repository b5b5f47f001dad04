// The results of stages by their key, for all strands alike: kept, being made now, or made. What several strands wait
// for is made once, and given up when the last of them has turned away.

import type { Measured, Plan } from "../wire.gen";
import { Cache } from "./cache";
import type { Watch } from "./stages";
import { type Images, type Oxygen, type Rates, type StageName, type Strand } from "./strand";

const mebi = 2 ** 20;

const caches = {
  measure: new Cache<Measured>(mebi),
  reconstruct: new Cache<Images>(512 * mebi),
  fit: new Cache<Rates>(256 * mebi),
  derive: new Cache<Oxygen>(256 * mebi),
};

type Kept = typeof caches;

/** The stages that have results of their own. */
export type LaterStage = keyof Kept;

export type ResultOf<Name extends LaterStage> = Kept[Name] extends Cache<infer Value> ? Value : never;

/** Makes one result; tells how far it is, and may be given up. */
export type Make<Name extends LaterStage> = (watch: Watch) => Promise<ResultOf<Name>>;

interface UnderWay {
  stage: LaterStage;
  result: Promise<unknown>;
  waiting: Map<Strand, Watch["tell"]>;
  stop: AbortController;
}

const underWay = new Map<string, UnderWay>();

/** Returns the result that a plan asks for, if it is kept. */
export function keptResult<Name extends LaterStage>(plan: Plan, name: Name): ResultOf<Name> | undefined {
  return (caches[name] as Cache<unknown> as Cache<ResultOf<Name>>).get(plan.keys[name]);
}

/** Tells whether the result that a plan asks for is being made for some strand. */
export function isUnderWay(plan: Plan, name: LaterStage): boolean {
  return underWay.has(plan.keys[name]);
}

/** Makes a result and keeps it, or waits for the one that is being made already. */
export function sharedResult<Name extends LaterStage>(
  strand: Strand,
  plan: Plan,
  name: Name,
  make: Make<Name>,
  tell: Watch["tell"],
): Promise<ResultOf<Name>> {
  const key = plan.keys[name];
  const known = underWay.get(key) ?? begin(key, name, make);
  known.waiting.set(strand, tell);
  return known.result as Promise<ResultOf<Name>>;
}

function begin<Name extends LaterStage>(key: string, stage: Name, make: Make<Name>): UnderWay {
  const waiting: UnderWay["waiting"] = new Map();
  const stop = new AbortController();
  const tell = (fraction: number) => waiting.forEach((one) => one(fraction));
  const made = make({ tell, signal: stop.signal }).then((value) => {
    (caches[stage] as Cache<unknown>).put(key, value, bytesOf[stage](value as never));
    return value;
  });
  const result = made.finally(() => {
    if (underWay.get(key)?.result === result) underWay.delete(key);
  });
  const begun = { stage, result, waiting, stop };
  underWay.set(key, begun);
  return begun;
}

/** Turns a strand away from the stages that are named; what nobody else waits for is given up at once. */
export function turnAway(strand: Strand, stages: readonly StageName[]): void {
  for (const [key, { stage, waiting, stop }] of underWay) {
    if (!stages.includes(stage) || !waiting.delete(strand) || waiting.size > 0) continue;
    underWay.delete(key);
    stop.abort();
  }
}

/** Forgets all results, because another acquisition is open. */
export function forgetResults(): void {
  for (const cache of Object.values(caches)) cache.clear();
  underWay.clear();
}

const bytesOf: { [Name in LaterStage]: (value: ResultOf<Name>) => number } = {
  measure: () => 1,
  reconstruct: ({ frames }) => frames.reduce((sum, image) => sum + image.byteLength, 0),
  fit: ({ rate }) => rate.byteLength * 5 + rate.length,
  derive: ({ fate, pO2 }) => fate.byteLength + (pO2 ? 2 * pO2.byteLength : 0),
};
