// The open acquisition. Opening another replaces it and its strands only once it has been read; until then, and after
// a fault, the old one stays.

import { batch, signal } from "@preact/signals";
import { Cancelled } from "../engine/fault";
import type { Input } from "../engine/pool";
import type { Opened } from "../wire.gen";
import { engine } from "./engine";
import { faultOf } from "./fault";
import { duringOpening, openFault, openingSettled } from "./opening";
import { forgetResults } from "./results";
import { endRun, rerun } from "./run";
import { strands } from "./strand";
import { firstStrand } from "./variants";
import { showFromTheStart } from "./view";

export const acquisition = signal<Opened | null>(null);

/** Opens raw files: one set of files is one acquisition. */
export async function openFiles(files: File[]): Promise<void> {
  if (files.length === 0) return;
  await open("open", { names: files.map((file) => file.name) }, files, files.map((file) => file.name).join(", "));
}

export async function openDemo(): Promise<void> {
  await open("demo", { noise: true }, [], "the made-up demo");
}

async function open<Kind extends "open" | "demo">(
  kind: Kind,
  body: Kind extends "open" ? { names: string[] } : { noise: boolean },
  inputs: Input[],
  what: string,
): Promise<void> {
  const answer = engine().request(kind, body as never, inputs);
  duringOpening(what, answer);
  try {
    const { body: opened } = await answer;
    await openingSettled();
    adopt(opened as Opened);
  } catch (error) {
    if (!(error instanceof Cancelled)) openFault.value = faultOf(error);
  }
}

function adopt(opened: Opened): void {
  for (const old of strands.value) endRun(old);
  forgetResults();
  const strand = firstStrand(opened.recipe);
  batch(() => {
    openFault.value = null;
    acquisition.value = opened;
    strands.value = [strand];
    showFromTheStart();
  });
  rerun(strand, "measure");
}
