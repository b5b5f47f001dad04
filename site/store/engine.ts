// The engine of the page and what it said at its start.

import { computed, signal } from "@preact/signals";
import { type Engine, startEngine } from "../engine/pool";
import type { Fault, Hello } from "../wire.gen";
import { faultOf } from "./fault";

const running = signal<Engine | null>(null);

/** Why the engine could not start; null while it starts and while it runs. */
export const startFault = signal<Fault | null>(null);

export const hello = computed<Hello | null>(() => running.value?.hello ?? null);

/** Returns the running engine. To be called only after start has resolved with true. */
export function engine(): Engine {
  if (!running.value) throw new Error("the engine is not running");
  return running.value;
}

/** Starts the engine and tells whether it runs. */
export async function start(): Promise<boolean> {
  try {
    running.value = await startEngine();
    return true;
  } catch (error) {
    startFault.value = faultOf(error);
    return false;
  }
}
