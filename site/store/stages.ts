// The stages of a strand as plain functions: each asks the engine for one result and remembers nothing.

import { voxelsOf, type Grid } from "../draw/grid";
import type { Plan } from "../wire.gen";
import { engine } from "./engine";
import type { Images, Oxygen, Rates } from "./strand";
import { inTurns } from "./turns";

/** Who looks on while a stage is made: is told the fraction done, and may give it up. */
export interface Watch {
  tell: (fraction: number) => void;
  signal: AbortSignal;
}

function gridOf(plan: Plan): Grid {
  return { n: [...plan.n], voxelMM: [...plan.voxelMM], originMM: [...plan.originMM] } as Grid;
}

export async function askPlan(recipeText: string): Promise<Plan> {
  return (await engine().request("plan", { recipe: recipeText, workers: engine().workers })).body;
}

export async function measure({ recipe }: Plan, watch: Watch) {
  return (await engine().request("measure", { recipe }, [], watched(watch))).body;
}

/** Makes the image of every frame; the jobs of the plan run beside each other. */
export async function reconstruct(plan: Plan, constants: string, { tell, signal }: Watch): Promise<Images> {
  const { recipe, reconstructJobs: jobs, keys } = plan;
  const grid = gridOf(plan);
  const images: Images = { key: keys.reconstruct, grid, timeUS: plan.frames.timeUS, frames: [], noiseSD: [] };
  const tellPart = partsOf(
    jobs.map((job) => job.length),
    tell,
  );
  await inTurns(jobs, jobs.length, async (frames, i) => {
    const onProgress = ({ fraction }: { fraction: number }) => tellPart(i, fraction);
    const options = { onProgress, signal };
    const { body, buffers } = await engine().request("reconstruct", { recipe, constants, frames }, [], options);
    frames.forEach((frame, at) => {
      images.frames[frame] = new Float32Array(buffers[0], at * voxelsOf(grid) * 4, voxelsOf(grid));
      images.noiseSD[frame] = body.noiseSD[at];
    });
    tellPart(i, 1);
  });
  return images;
}

/** Fits every voxel. At most one job more than there are workers is copied out at a time, to bound the memory. */
export async function fit(plan: Plan, images: Images, { tell, signal }: Watch): Promise<Rates> {
  const { recipe, fitJobs: jobs, keys } = plan;
  const rates = emptyRates(keys.fit, images.grid);
  const tellPart = partsOf(
    jobs.map(([from, to]) => to - from),
    tell,
  );
  await inTurns(jobs, engine().workers + 1, async ([from, to], i) => {
    const request = { recipe, noiseSD: images.noiseSD, voxels: to - from };
    const onProgress = ({ fraction }: { fraction: number }) => tellPart(i, fraction);
    const options = { transfer: true, onProgress, signal };
    const { buffers } = await engine().request("fit", request, [gathered(images, from, to)], options);
    keep(rates, buffers, from);
    tellPart(i, 1);
  });
  return rates;
}

/** Makes mask, pO2 and numbers out of a finished fit. */
export async function derive(plan: Plan, images: Images, rates: Rates, watch: Watch): Promise<Oxygen> {
  const inputs = [images.frames[plan.frames.reference], rates.rate, rates.rateSE, rates.status];
  if (plan.recipe.sample.referenceUM) inputs.push(rates.amplitude, rates.amplitudeSE);
  const { body, buffers } = await engine().request("derive", { recipe: plan.recipe }, inputs, watched(watch));
  return {
    key: plan.keys.derive,
    grid: images.grid,
    fate: new Uint8Array(buffers[0]),
    pO2: body.pO2 ? new Float32Array(buffers[1]) : null,
    pO2SE: body.pO2 ? new Float32Array(buffers[2]) : null,
    derived: body,
  };
}

function watched({ tell, signal }: Watch) {
  return { onProgress: ({ fraction }: { fraction: number }) => tell(fraction), signal };
}

function emptyRates(key: string, grid: Grid): Rates {
  const empty = () => new Float32Array(voxelsOf(grid));
  const status = new Uint8Array(voxelsOf(grid));
  const values = { rate: empty(), rateSE: empty(), amplitude: empty(), amplitudeSE: empty(), chiSquare: empty() };
  return { key, grid, ...values, status };
}

/** Returns the values of a range of voxels as [frame][voxel]. */
function gathered({ frames }: Images, from: number, to: number): Float32Array<ArrayBuffer> {
  const out = new Float32Array(frames.length * (to - from));
  frames.forEach((image, f) => out.set(image.subarray(from, to), f * (to - from)));
  return out;
}

function keep(rates: Rates, buffers: ArrayBuffer[], from: number): void {
  const { rate, rateSE, amplitude, chiSquare, status, amplitudeSE } = rates;
  [rate, rateSE, amplitude, chiSquare].forEach((whole, i) => whole.set(new Float32Array(buffers[i]), from));
  status.set(new Uint8Array(buffers[4]), from);
  amplitudeSE.set(new Float32Array(buffers[5]), from);
}

/** Returns a function that notes the fraction of one job and tells that of all of them. */
function partsOf(sizes: number[], tell: Watch["tell"]): (job: number, fraction: number) => void {
  const total = sizes.reduce((sum, size) => sum + size, 0);
  const done = sizes.map(() => 0);
  return (job, fraction) => {
    done[job] = fraction * sizes[job];
    tell(done.reduce((sum, part) => sum + part, 0) / total);
  };
}
