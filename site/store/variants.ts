// Making, naming and removing strands, and which of them was touched last: undo, redo and the menus act on that one.

import { batch, computed, signal } from "@preact/signals";
import type { Recipe } from "../wire.gen";
import { endRun, rerun } from "./run";
import { makeStrand, stageNames, strands, type Strand } from "./strand";

const touchedID = signal(0);

/** The strand that was touched last; the first when that one is gone. */
export const touched = computed<Strand | undefined>(
  () => strands.value.find(({ id }) => id === touchedID.value) ?? strands.value[0],
);

interface Removed {
  strand: Strand;
  at: number;
}

/** The strand that was removed last, so that it can be brought back; null when there is none. */
export const removed = signal<Removed | null>(null);

let nextID = 0;

export function touch(strand: Strand): void {
  touchedID.value = strand.id;
}

/** Returns the one strand that a newly opened acquisition starts with. */
export function firstStrand(defaults: Recipe): Strand {
  nextID = 0;
  const strand = makeStrand(nextID++, nameFor([]), defaults);
  batch(() => {
    touch(strand);
    removed.value = null;
  });
  return strand;
}

/** Adds a copy of a strand after it, and runs it: only what will be changed in it has to be made anew. */
export function addVariant(of: Strand): Strand {
  const name = nameFor(strands.value.map((strand) => strand.name.value));
  const copy = makeStrand(nextID++, name, of.defaults);
  for (const part of ["recipe", "plan", "planned", "images", "rates", "oxygen", "warnings"] as const) {
    (copy[part] as { value: unknown }).value = of[part].value;
  }
  for (const stage of stageNames) copy.stages[stage].value = { state: "waiting" };
  batch(() => {
    insert(copy, strands.value.indexOf(of) + 1);
    touch(copy);
  });
  rerun(copy, "measure");
  return copy;
}

/** Removes a strand. The last one stays. */
export function removeVariant(strand: Strand): void {
  const at = strands.value.indexOf(strand);
  if (at < 0 || strands.value.length === 1) return;
  endRun(strand);
  batch(() => {
    strands.value = strands.value.filter((other) => other !== strand);
    removed.value = { strand, at };
    touch(strands.value[Math.max(at - 1, 0)]);
  });
}

/** Brings the strand back that was removed last. */
export function bringBack(): void {
  const gone = removed.value;
  if (!gone) return;
  batch(() => {
    insert(gone.strand, gone.at);
    removed.value = null;
    touch(gone.strand);
  });
  rerun(gone.strand, "measure");
}

/** Gives a strand another name; an empty one is not taken. */
export function rename(strand: Strand, name: string): void {
  strand.name.value = name.trim() || strand.name.value;
}

function insert(strand: Strand, at: number): void {
  strands.value = [...strands.value.slice(0, at), strand, ...strands.value.slice(at)];
}

/** Returns the first of Variant A, B, ..., Z, A2, B2, ... that is not taken. */
export function nameFor(taken: string[]): string {
  for (let i = 0; ; i++) {
    const round = Math.floor(i / 26);
    const name = `Variant ${String.fromCharCode(65 + (i % 26))}${round > 0 ? round + 1 : ""}`;
    if (!taken.includes(name)) return name;
  }
}
