// The directions of all shots, and the chosen shot beside its neighbours and the image of the first strand. Both are asked
// for only while the check is open.

import { computed, effect, signal } from "@preact/signals";
import { Cancelled } from "../engine/fault";
import type { Fault, Opened, Recipe, ShotView } from "../wire.gen";
import { acquisition } from "./acquisition";
import { engine } from "./engine";
import { faultOf } from "./fault";
import { checkOpen } from "./findings";
import { openingSettled } from "./opening";
import { strands } from "./strand";
import { shot } from "./view";

export interface Directions {
  opened: Opened;
  dim: number;
  /** The shots that make the image. */
  shots: number[];
  /** Gradient of every shot in mT/m. */
  gradient: number[][];
}

const known = signal<Directions | null>(null);

/** Directions of the open acquisition; null until they are known. */
export const directions = computed(() => (known.value?.opened === acquisition.value ? known.value : null));

export const shotView = signal<ShotView | null>(null);
export const shotFault = signal<Fault | null>(null);

interface Wanted {
  opened: Opened;
  shot: number;
  recipe: Recipe;
  image: Float32Array<ArrayBuffer> | null;
}

const wanted = computed<Wanted | null>(() => {
  const [opened, strand] = [acquisition.value, strands.value[0]];
  if (!checkOpen.value || !opened || !strand) return null;
  const [plan, images] = [strand.plan.value, strand.images.value];
  if (!plan) return null;
  const fits = images?.key === plan.keys.reconstruct;
  const image = (fits && images?.frames[plan.frames.reference]) || null;
  const voxels = plan.n[0] * plan.n[1] * plan.n[2];
  return { opened, shot: shot.value, recipe: plan.recipe, image: image?.length === voxels ? image : null };
});

/** Keeps both up to date from now on. */
export function followShots(): void {
  effect(() => {
    const opened = acquisition.value;
    if (checkOpen.value && opened && known.peek()?.opened !== opened) void fetchDirections(opened);
  });
  effect(() => {
    if (wanted.value) void fetchShot(wanted.value);
  });
}

async function fetchDirections(opened: Opened): Promise<void> {
  const answer = await patiently(
    () => acquisition.peek() === opened,
    () => engine().request("directions", {}),
  );
  if (!answer) return;
  const flat = new Float32Array(answer.buffers[0]);
  const role = new Uint8Array(answer.buffers[1]);
  const gradient = Array.from(role, (_, s) => [...flat.subarray(3 * s, 3 * s + 3)]);
  const shots = [...role.keys()].filter((s) => role[s] === 0 && gradient[s].some((g) => g !== 0));
  known.value = { opened, dim: answer.body.dim, shots, gradient };
}

async function fetchShot(now: Wanted): Promise<void> {
  const current = () => wanted.peek() === now;
  const ask = { recipe: now.recipe, shot: now.shot };
  const answer = await patiently(current, () => engine().request("shot", ask, now.image ? [now.image] : []));
  if (answer) [shotView.value, shotFault.value] = [answer.body, null];
}

/** Asks until there is an answer or it is no longer wanted. A fault is kept for the page to show. */
async function patiently<Value>(current: () => boolean, ask: () => Promise<Value>): Promise<Value | null> {
  while (current()) {
    try {
      const answer = await ask();
      return current() ? answer : null;
    } catch (error) {
      if (!(error instanceof Cancelled)) {
        if (current()) shotFault.value = faultOf(error);
        return null;
      }
      await openingSettled();
    }
  }
  return null;
}
