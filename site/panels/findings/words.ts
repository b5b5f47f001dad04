// Findings in words.

import { plain, unitText } from "../../draw/number";
import { countsOf, levels, worstOf, type Level } from "../../store/findings";
import type { Report, Setting } from "../../wire.gen";

/** A mark of its own shape for every level. */
export const marks: Record<Level, string> = { stop: "\u25a0", doubt: "\u25b2", fine: "\u25cf" };

const advice: Record<Level, string> = {
  stop: "stop: do not believe an image from these data as they are",
  doubt: "doubt: something to correct, to leave out or to keep in mind",
  fine: "fine: nothing stands out",
};

/** Returns the worst level in words and how many findings there are of each. */
export function verdictOf(report: Report): string {
  const counts = countsOf(report);
  return `${advice[worstOf(report)]} (${levels.map((level) => `${counts[level]} ${level}`).join(", ")})`;
}

/** Returns a list of numbers, cut short when it is long. */
export function listOf(numbers: number[], most = 12): string {
  const shown = numbers.slice(0, most).join(", ");
  return numbers.length > most ? `${shown} and ${numbers.length - most} more` : shown;
}

/** Returns "label: value unit" of a setting that is to change. */
export function changeOf(name: string, value: unknown, catalogue: Setting[]): string {
  const setting = catalogue.find(({ path }) => path === `conditioning.${name}`);
  const label = setting?.label ?? name;
  return `${label}: ${valueText(value, setting)}`;
}

function valueText(value: unknown, setting?: Setting): string {
  if (Array.isArray(value)) return listOf(value as number[]);
  if (typeof value === "number") return `${plain(value, 4)} ${unitText(setting?.unit ?? "")}`.trim();
  return setting?.choices.find((choice) => choice.value === value)?.label ?? String(value);
}
