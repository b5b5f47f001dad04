// Handing back: maps and recipe as files, and a recipe taken in again.

import { signal } from "@preact/signals";
import { insideMask } from "../draw/fate";
import type { Fault, Recipe } from "../wire.gen";
import { acquisition } from "./acquisition";
import { setRecipe } from "./edit";
import { engine } from "./engine";
import { faultOf } from "./fault";
import { type Strand } from "./strand";
import { delay } from "./view";

export type MapName = "pO2" | "rate" | "amplitude" | "mask";

export const mapNames: MapName[] = ["pO2", "rate", "amplitude", "mask"];

/** Why the last saving or loading did not work; null when it did. */
export const saveFault = signal<Fault | null>(null);

/** Tells whether a strand has the map to be saved. */
export function canSave(strand: Strand, map: MapName): boolean {
  const { oxygen, rates, images } = strand;
  if (map === "pO2") return Boolean(oxygen.value?.pO2);
  return Boolean({ rate: rates, amplitude: images, mask: oxygen }[map].value);
}

export async function saveMap(strand: Strand, map: MapName): Promise<void> {
  const values = valuesOf(strand, map);
  const plan = strand.plan.value;
  const opened = acquisition.value;
  if (!values || !plan || !opened) return;
  await noted(async () => {
    const request = { recipe: plan.recipe, quantity: map, delayUS: opened.delayUS[delay.value] };
    const { body, buffers } = await engine().request("export", request, [new Float32Array(values)]);
    download(body.name, new Blob([buffers[0]], { type: body.type }));
  });
}

export async function saveMaps(strand: Strand): Promise<void> {
  for (const map of mapNames) await saveMap(strand, map);
}

/** Saves the complete recipe of the last plan that held. */
export function saveRecipe(strand: Strand): void {
  const recipe = strand.plan.value?.recipe ?? strand.recipe.value;
  const text = JSON.stringify(recipe, null, 2) + "\n";
  const stem = acquisition.value?.name ?? "acquisition";
  download(`${stem}-recipe.json`, new Blob([text], { type: "application/json" }));
}

/** Takes a recipe in. It is checked by the engine first; a faulty one changes nothing. */
export async function loadRecipe(strand: Strand, file: File): Promise<void> {
  await noted(async () => {
    const recipe = await file.text();
    const { body } = await engine().request("plan", { recipe, workers: engine().workers });
    setRecipe(strand, body.recipe as Recipe);
  });
}

async function noted(work: () => Promise<void>): Promise<void> {
  saveFault.value = null;
  try {
    await work();
  } catch (error) {
    saveFault.value = faultOf(error);
  }
}

function valuesOf(strand: Strand, map: MapName): ArrayLike<number> | null {
  const { fate, pO2 } = strand.oxygen.value ?? {};
  if (map === "pO2") return pO2 ?? null;
  if (map === "rate") return strand.rates.value?.rate ?? null;
  if (map === "mask") return fate?.map((value) => Number(insideMask(value))) ?? null;
  return strand.images.value?.delays[delay.value] ?? null;
}

function download(name: string, blob: Blob): void {
  const url = URL.createObjectURL(blob);
  const link = document.createElement("a");
  link.href = url;
  link.download = name;
  link.click();
  setTimeout(() => URL.revokeObjectURL(url), 10_000);
}
