// The window of a map: the values that the ends of its colour bar stand for.

export interface Window {
  low: number;
  high: number;
}

const samplesLooked = 1 << 15;

/** Returns a window with round ends that holds the given range. */
export function rounded(low: number, high: number): Window {
  if (!(high > low)) return { low: Math.min(low, 0) || 0, high: Math.max(high, 0) || 1 };
  const step = niceStep((high - low) / 10);
  return { low: tidy(Math.floor(low / step + 1e-9) * step), high: tidy(Math.ceil(high / step - 1e-9) * step) };
}

/** Returns 1, 2, 2.5 or 5 times a power of ten, the least that is not below the given size. */
export function niceStep(size: number): number {
  const power = 10 ** Math.floor(Math.log10(size));
  const factor = [1, 2, 2.5, 5, 10].find((f) => f * power >= size * (1 - 1e-9)) ?? 10;
  return factor * power;
}

/** Returns the round values between the ends of a window, about as many as asked for. */
export function ticksOf({ low, high }: Window, wanted: number): number[] {
  if (!(high > low)) return [low];
  const step = niceStep((high - low) / wanted);
  const ticks: number[] = [];
  for (let i = Math.ceil(low / step - 1e-9); i * step <= high + step * 1e-9; i++) ticks.push(tidy(i * step));
  return ticks;
}

/**
 * Returns the values below which the shares p and q of the finite values lie. Approximate: at most 32768 values,
 * evenly strided, are looked at, so that a large volume does not hold up the page.
 */
export function quantilesOf(values: Float32Array, p: number, q: number): [number, number] {
  const stride = Math.max(Math.floor(values.length / samplesLooked), 1);
  const seen: number[] = [];
  for (let i = 0; i < values.length; i += stride) if (Number.isFinite(values[i])) seen.push(values[i]);
  if (seen.length === 0) return [0, 1];
  const sorted = Float32Array.from(seen).sort();
  const at = (share: number) => sorted[Math.round(share * (sorted.length - 1))];
  return [at(p), at(q)];
}

/** Returns the value below which a share of a histogram lies. Exact to one bin. */
export function quantileOfBins(edges: number[], counts: number[], share: number): number {
  const total = counts.reduce((sum, c) => sum + c, 0);
  let below = 0;
  for (let bin = 0; bin < counts.length; bin++) {
    below += counts[bin];
    if (below >= share * total) return share < 0.5 ? edges[bin] : edges[bin + 1];
  }
  return edges[edges.length - 1] ?? 1;
}

function tidy(value: number): number {
  return Number(value.toPrecision(10));
}
