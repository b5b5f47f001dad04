// Handing back: maps and recipe as files, and a recipe taken in again.

import { signal } from "@preact/signals";
import { hasValue } from "../draw/fate";
import type { Fault, Recipe } from "../wire.gen";
import { acquisition } from "./acquisition";
import { setRecipe } from "./edit";
import { engine } from "./engine";
import { faultOf } from "./fault";
import { textOf } from "./recipe";
import { isCoarse, isOlder, type Oxygen, type Rates, strands, type Strand } from "./strand";
import { frameShown } from "./view";

export type MapName = "pO2" | "rate" | "amplitude" | "mask";

export const mapNames: MapName[] = ["pO2", "rate", "amplitude", "mask"];

/** Why the last saving or loading did not work; null when it did. */
export const saveFault = signal<Fault | null>(null);

const stageOf: Record<MapName, "reconstruct" | "derive"> = {
  pO2: "derive",
  rate: "derive",
  amplitude: "reconstruct",
  mask: "derive",
};

/** Tells whether a strand has the map, and has it in full and with the settings that stand now. */
export function canSave(strand: Strand, map: MapName): boolean {
  const { oxygen, images } = strand;
  const shown = { pO2: oxygen.value?.pO2, rate: oxygen.value, amplitude: images.value, mask: oxygen.value }[map];
  return Boolean(shown) && !isOlder(strand, stageOf[map]) && !isCoarse(strand, stageOf[map]);
}

export async function saveMap(strand: Strand, map: MapName): Promise<void> {
  const values = valuesOf(strand, map);
  const plan = strand.plan.value;
  if (!values || !plan || !canSave(strand, map)) return;
  await noted(async () => {
    const request = { recipe: plan.recipe, quantity: map, rateName: plan.frames.rateName };
    const { body, buffers } = await engine().request("export", request, [values]);
    download(named(strand, body.name), new Blob([buffers[0]], { type: body.type }));
  });
}

export async function saveMaps(strand: Strand): Promise<void> {
  for (const map of mapNames) await saveMap(strand, map);
}

/** Saves the complete recipe of the last plan that held. */
export function saveRecipe(strand: Strand): void {
  const recipe = strand.plan.value?.recipe ?? strand.recipe.value;
  const text = textOf(recipe, 2) + "\n";
  const stem = acquisition.value?.name ?? "acquisition";
  download(named(strand, `${stem}-recipe.json`), new Blob([text], { type: "application/json" }));
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

/** Returns the array of a map as the export takes it: the values, or for the mask the fates. */
function valuesOf(strand: Strand, map: MapName): Float32Array<ArrayBuffer> | Uint8Array<ArrayBuffer> | null {
  const oxygen = strand.oxygen.value;
  if (map === "amplitude") return frameShown(strand.images.value);
  if (map === "rate") return inMap(oxygen, strand.rates.value);
  return (map === "mask" ? oxygen?.fate : oxygen?.pO2) ?? null;
}

/** Returns the rates with NaN outside the map. */
function inMap(oxygen: Oxygen | null, rates: Rates | null): Float32Array<ArrayBuffer> | null {
  if (!oxygen || !rates || oxygen.fate.length !== rates.rate.length) return null;
  return rates.rate.map((rate, i) => (hasValue(oxygen.fate[i]) ? rate : NaN));
}

/** Puts the name of a strand before that of a file, where there is more than one strand. */
function named(strand: Strand, file: string): string {
  if (strands.value.length < 2) return file;
  return `${strand.name.value.replace(/[^\p{L}\p{N}]+/gu, "-").toLowerCase()}-${file}`;
}

function download(name: string, blob: Blob): void {
  const url = URL.createObjectURL(blob);
  const link = document.createElement("a");
  link.href = url;
  link.download = name;
  link.click();
  setTimeout(() => URL.revokeObjectURL(url), 10_000);
}
