// Whether files are being opened now, and what the last try said against them.

import { signal } from "@preact/signals";
import type { Fault } from "../wire.gen";

/** What is being opened, in words; empty when nothing is. */
export const opening = signal("");

/** Why the last files could not be opened; null once dismissed or overtaken by a success. */
export const openFault = signal<Fault | null>(null);

let settled: Promise<unknown> = Promise.resolve();

/** Resolves when no file is being opened any more. */
export async function openingSettled(): Promise<void> {
  let seen;
  do {
    seen = settled;
    await seen;
  } while (seen !== settled);
}

/** Notes that something is being opened until the work settles. */
export function duringOpening(what: string, work: Promise<unknown>): void {
  opening.value = what;
  const mine = work
    .catch(() => {})
    .then(() => {
      if (settled === mine) opening.value = "";
    });
  settled = mine;
}
