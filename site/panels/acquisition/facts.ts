// The facts of an acquisition in words.

import { bytes, count, plain, significant } from "../../draw/number";
import type { Coverage, Opened, SampleTime } from "../../wire.gen";

export interface Fact {
  key: string;
  label: string;
  text: string;
}

const sequences: Record<string, string> = {
  "inversion-recovery": "inversion recovery",
  "saturation-recovery": "saturation recovery",
  "echo-decay": "echo decay",
  "free-decay": "free decay",
};

/** Returns the facts in reading order: what was measured, what it allows, what was noted beside it. */
export function factsOf(opened: Opened): Fact[] {
  return [...measuredFacts(opened), ...limitFacts(opened), ...notedFacts(opened)];
}

export { bytes as sizeOf };

function measuredFacts(o: Opened): Fact[] {
  const sampled = `${o.samples}${o.dwellNS > 0 ? ` every ${plain(o.dwellNS, 4)} ns` : " positions"}`;
  return [
    { key: "sequence", label: "sequence", text: `${sequences[o.sequence] ?? o.sequence}, gives ${o.rateName}` },
    { key: "dim", label: "image", text: `${o.dim}D, ${o.encoding === "spoke" ? "spokes" : "single points"}` },
    { key: "delays", label: "delays", text: `${o.delays}, ${rangeOf(o.delayUS)} µs` },
    { key: "shots", label: "shots", text: `${count(o.shots)}, of which ${count(o.imageShots)} for the image` },
    { key: "samples", label: "samples", text: sampled },
    { key: "timeZero", label: "time zero", text: `sample ${plain(o.timeZeroSample, 5)}` },
    { key: "gradient", label: "gradient", text: `${rangeOf([o.gradientMinMTPerM, o.gradientMaxMTPerM])} mT/m` },
  ];
}

function limitFacts(o: Opened): Fact[] {
  return [
    ...(o.coverage ? coverageFacts(o.coverage, o.extentMM) : spokeFacts(o)),
    { key: "extent", label: "measured extent", text: `${significant(o.extentMM)} mm across` },
    { key: "signalToNoise", label: "signal to noise", text: significant(o.signalToNoise, 2) },
  ];
}

function spokeFacts(o: Opened): Fact[] {
  return [
    { key: "kMax", label: "k max", text: `${significant(o.kMaxPerMM)} /mm` },
    { key: "resolution", label: "resolution 1/(2 k max)", text: `${significant(o.resolutionMM)} mm` },
    { key: "aliasFree", label: "alias-free field of view", text: `${significant(o.aliasFreeMM)} mm` },
  ];
}

/** Field of view and resolution of single-point data fall with the sample time: what the first and the last one give. */
function coverageFacts({ cartesian, values, times }: Coverage, extentMM: number): Fact[] {
  const usable = times.filter((time) => time.usable);
  const ends = [usable[0], usable[usable.length - 1]].filter((time) => time !== undefined);
  const fromTo = (of: (time: SampleTime) => number) => ends.map((time) => significant(of(time))).join(" to ");
  const grid = cartesian ? values.filter((n) => n > 0).join(" × ") : "no regular grid";
  return [
    { key: "gradients", label: "gradients", text: grid },
    { key: "fieldOfView", label: "field of view over time", text: `${fromTo((t) => t.fieldOfViewMM)} mm` },
    { key: "resolution", label: "resolution over time", text: `${fromTo((t) => t.resolutionMM)} mm` },
    { key: "covering", label: "hold the object", text: coveringOf(usable, extentMM) },
  ];
}

/** Returns how many sample times have a field of view that holds the object. */
export function coveringOf(times: SampleTime[], extentMM: number): string {
  const covering = times.filter((time) => time.fieldOfViewMM >= extentMM);
  return `${covering.length} of ${times.length} sample times`;
}

function notedFacts({ optional }: Opened): Fact[] {
  const facts: Fact[] = [];
  const add = (key: string, label: string, value: number | string | undefined, unit = "") => {
    if (value === undefined || value === "") return;
    facts.push({ key, label, text: typeof value === "number" ? `${plain(value, 6)}${unit}` : value });
  };
  add("temperature", "temperature", optional.temperature_C, " °C");
  add("probe", "probe", optional.probe);
  add("carrier", "carrier", optional.carrier_MHz, " MHz");
  add("note", "note", optional.note);
  return facts;
}

function rangeOf(values: number[]): string {
  const [low, high] = [plain(Math.min(...values), 4), plain(Math.max(...values), 4)];
  return low === high ? low : `${low} to ${high}`;
}
