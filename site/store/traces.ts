// The curves of one shot at the shown delay, asked for again whenever shot, delay or acquisition change.

import { effect, signal } from "@preact/signals";
import { Cancelled } from "../engine/fault";
import type { Fault, Opened, Traces } from "../wire.gen";
import { acquisition } from "./acquisition";
import { engine } from "./engine";
import { faultOf } from "./fault";
import { openingSettled } from "./opening";
import { frameIndex, shot } from "./view";

export const traces = signal<Traces | null>(null);
export const tracesFault = signal<Fault | null>(null);

/** Keeps the curves up to date from now on. */
export function followTraces(): void {
  effect(() => {
    const opened = acquisition.value;
    if (opened) void fetchTraces(opened, frameIndex(opened.delayUS), shot.value);
  });
}

async function fetchTraces(opened: Opened, atDelay: number, atShot: number): Promise<void> {
  const wanted = () => acquisition.peek() === opened && frameIndex(opened.delayUS) === atDelay && shot.peek() === atShot;
  while (wanted()) {
    try {
      const { body } = await engine().request("traces", { delay: atDelay, shot: atShot });
      if (wanted()) [traces.value, tracesFault.value] = [body, null];
      return;
    } catch (error) {
      if (!(error instanceof Cancelled)) {
        if (wanted()) tracesFault.value = faultOf(error);
        return;
      }
      await openingSettled();
    }
  }
}
