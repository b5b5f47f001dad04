// What is to be said of the acquisition as the first strand conditions it, asked for again whenever its conditioning or the
// rates found have changed and the strand has come to rest. Findings are about the data, so that what follows from them,
// shots left out and corrections, goes into every strand.

import { computed, effect, signal } from "@preact/signals";
import { Cancelled } from "../engine/fault";
import type { Fault, Opened, Recipe, Report, Settings, Summary } from "../wire.gen";
import { acquisition } from "./acquisition";
import { setValue } from "./edit";
import { engine } from "./engine";
import { faultOf } from "./fault";
import { openingSettled } from "./opening";
import { stageNames, strands, type Strand } from "./strand";

export type Level = "stop" | "doubt" | "fine";

/** The levels, worst first. */
export const levels: Level[] = ["stop", "doubt", "fine"];

export interface Findings {
  opened: Opened;
  /** Conditioning and rates that the report was made with, as text. */
  key: string;
  /** The conditioning alone. */
  conditioning: string;
  report: Report;
}

export const findings = signal<Findings | null>(null);
export const findingsFault = signal<Fault | null>(null);
export const examining = signal(false);

/** Whether the check is open; what only it shows is not asked for before. */
export const checkOpen = signal(false);

interface Wanted {
  opened: Opened;
  recipe: Recipe;
  rates: Summary | null;
  key: string;
}

/** What is to be examined now, null while the first strand works. */
const wanted = computed<Wanted | null>(() => {
  const [opened, strand] = [acquisition.value, strands.value[0]];
  if (!opened || !strand || !atRest(strand)) return null;
  const recipe = strand.planned.value ?? strand.recipe.value;
  const rates = strand.oxygen.value?.derived.rate ?? null;
  const key = JSON.stringify([recipe.conditioning, rates?.count ? [rates.median, rates.central90] : null]);
  return { opened, recipe, rates, key };
});

function atRest({ stages }: Strand): boolean {
  const states = stageNames.map((name) => stages[name].value.state);
  return states.includes("failed") || states.every((state) => state === "done");
}

/** Keeps the findings up to date from now on. */
export function followFindings(): void {
  effect(() => {
    const now = wanted.value;
    if (now && !isKnown(now)) void examine(now);
  });
}

function isKnown({ opened, key }: Wanted): boolean {
  const known = findings.peek();
  return known?.opened === opened && known.key === key;
}

async function examine(now: Wanted): Promise<void> {
  const current = () => wanted.peek() === now;
  examining.value = true;
  while (current()) {
    try {
      const { body } = await engine().request("examine", { recipe: now.recipe, rates: now.rates });
      if (!current()) break;
      const conditioning = JSON.stringify(now.recipe.conditioning);
      findings.value = { opened: now.opened, key: now.key, conditioning, report: body };
      findingsFault.value = null;
      break;
    } catch (error) {
      if (!(error instanceof Cancelled)) {
        if (current()) findingsFault.value = faultOf(error);
        break;
      }
      await openingSettled();
    }
  }
  if (current() || wanted.peek() === null) examining.value = false;
}

/** The report on the open acquisition; null until there is one. */
export const report = computed<Report | null>(() => {
  const known = findings.value;
  return known && known.opened === acquisition.value ? known.report : null;
});

/** Whether the report was made with another conditioning than the one that stands. */
export const isOlderReport = computed(() => {
  const conditioning = strands.value[0]?.recipe.value.conditioning;
  return findings.value !== null && JSON.stringify(conditioning) !== findings.value.conditioning;
});

export function countsOf({ findings: all }: Report): Record<Level, number> {
  const count = (level: Level) => all.filter((one) => one.level === level).length;
  return { stop: count("stop"), doubt: count("doubt"), fine: count("fine") };
}

export function worstOf(of: Report): Level {
  const counts = countsOf(of);
  return levels.find((level) => counts[level] > 0) ?? "fine";
}

/** The shots that the first strand leaves out. */
export const leftOut = computed<ReadonlySet<number>>(() => {
  return new Set(strands.value[0]?.recipe.value.conditioning.excludeShots ?? []);
});

/** Leaves a shot out of every strand, or takes it back into every strand. */
export function setLeftOut(shot: number, out: boolean): void {
  for (const strand of strands.value) {
    const now = new Set(strand.recipe.value.conditioning.excludeShots ?? []);
    if (out) now.add(shot);
    else now.delete(shot);
    const list = [...now].sort((a, b) => a - b);
    setValue(strand, "conditioning.excludeShots", list.length > 0 ? list : undefined, "measure");
  }
}

/** Returns the settings that the report would change, by name. */
export function proposedChanges(of: Report, now: Settings): Partial<Settings> {
  const all = Object.entries(of.proposed) as [keyof Settings, unknown][];
  return Object.fromEntries(all.filter(([name, value]) => JSON.stringify(value) !== JSON.stringify(now[name])));
}

/** What the maps and the findings said at one moment. */
export interface Standing {
  quantity: string;
  unit: string;
  median: number | null;
  medianSE: number;
  report: Report;
}

/** Returns how the first strand stands, null while it works or the report lags behind. */
export function standing(): Standing | null {
  const [strand, now] = [strands.value[0], report.value];
  const derived = strand?.oxygen.value?.derived;
  if (!strand || !now || !derived || !wanted.value || isOlderReport.value || examining.value) return null;
  const summary = derived.pO2 ?? derived.rate;
  const quantity = derived.pO2 ? "pO₂" : (acquisition.value?.rateName ?? "rate");
  const median = summary.count > 0 ? summary.median : null;
  return { quantity, unit: summary.unit, median, medianSE: summary.medianSE, report: now };
}

export interface Applied {
  opened: Opened;
  before: Standing | null;
  /** The conditioning of the first strand after it. */
  conditioning: string;
  former: Map<Strand, Settings>;
}

const lastApplied = signal<Applied | null>(null);

/** The proposal that was taken over last, as long as its settings stand. */
export const applied = computed<Applied | null>(() => {
  const last = lastApplied.value;
  const now = strands.value[0]?.recipe.value.conditioning;
  return last && last.opened === acquisition.value && JSON.stringify(now) === last.conditioning ? last : null;
});

/**
 * Takes what the report proposes into every strand: the settings in which it differs from those it judged. A strand keeps
 * what it has of its own, and leaves out its own shots beside those proposed.
 */
export function applyProposed(): void {
  const [now, opened, first] = [report.value, acquisition.value, strands.value[0]];
  if (!now || !opened || !first) return;
  const changes = proposedChanges(now, first.recipe.value.conditioning);
  const before = standing();
  const former = new Map<Strand, Settings>();
  for (const strand of strands.value) {
    const own = strand.recipe.value.conditioning;
    former.set(strand, own);
    const after = { ...own, ...changes };
    if (changes.excludeShots) after.excludeShots = together(own.excludeShots, changes.excludeShots);
    setValue(strand, "conditioning", after, "measure");
  }
  lastApplied.value = { opened, before, conditioning: JSON.stringify(first.recipe.value.conditioning), former };
}

/** Gives every strand back the conditioning that it had before the proposal. */
export function takeBack(): void {
  const last = applied.value;
  if (!last) return;
  for (const strand of strands.value) {
    const former = last.former.get(strand);
    if (former) setValue(strand, "conditioning", former, "measure");
  }
}

function together(a: number[] = [], b: number[] = []): number[] {
  return [...new Set([...a, ...b])].sort((one, other) => one - other);
}
