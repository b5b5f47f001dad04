// What sets one recipe apart from another, in words.

import { plain, unitText } from "../draw/number";
import type { Recipe, Setting } from "../wire.gen";
import { textOfList } from "./list";
import { sameValue, valueAt } from "./recipe";

/** Tells whether a reconstruction method makes use of a setting. */
export function isForMethod({ methods }: Setting, method: string): boolean {
  return methods.length === 0 || methods.includes(method);
}

/** Tells whether a recipe makes use of a setting. */
function isUsed(setting: Setting, { reconstruction, calibration }: Recipe): boolean {
  if (setting.path.startsWith("calibration.") && !calibration) return false;
  return isForMethod(setting, reconstruction.method);
}

/** Returns the settings that a recipe uses and that have another value in it than in the other recipe. */
export function changedSettings(settings: Setting[], recipe: Recipe, other: Recipe): Setting[] {
  const differs = (setting: Setting) => !sameValue(valueIn(recipe, setting), valueIn(other, setting));
  return settings.filter((setting) => isUsed(setting, recipe) && differs(setting));
}

/** Returns the value of a setting, that of an absent one being what the engine takes it for. */
function valueIn(recipe: Recipe, { path, kind }: Setting): unknown {
  return valueAt(recipe, path) ?? (kind === "list" ? [] : kind === "choice" ? "" : 0);
}

/** Returns "cutoff 0.8" with the unit, where that is one of measure. */
export function wordsFor(setting: Setting, recipe: Recipe): string {
  return `${nameOf(setting)} ${valueWords(setting, recipe)}${unitOf(setting)}`;
}

/**
 * Returns one phrase for every difference of a recipe from a reference: "cutoff 0.8 instead of 1". A setting that only
 * this recipe uses has nothing that it could stand instead of.
 */
export function differences(settings: Setting[], recipe: Recipe, reference: Recipe): string[] {
  return [
    ...conversion(recipe, reference),
    ...changedSettings(settings, recipe, reference)
      .filter(({ path }) => !path.startsWith("calibration.") || reference.calibration)
      .map((setting) => phrase(setting, recipe, reference)),
  ];
}

function conversion({ calibration }: Recipe, reference: Recipe): string[] {
  if (Boolean(calibration) === Boolean(reference.calibration)) return [];
  return [calibration ? "converted to pO₂" : "not converted to pO₂"];
}

function phrase(setting: Setting, recipe: Recipe, reference: Recipe): string {
  if (!isUsed(setting, reference)) return wordsFor(setting, recipe);
  const [now, then] = [valueWords(setting, recipe), valueWords(setting, reference)];
  return `${nameOf(setting)} ${now} instead of ${then}${unitOf(setting)}`;
}

function valueWords(setting: Setting, recipe: Recipe): string {
  const value = valueIn(recipe, setting);
  if (setting.kind === "list") return textOfList(value as number[]) || "none";
  if (setting.kind === "choice") return setting.choices.find((choice) => choice.value === value)?.label ?? String(value);
  return plain(value as number);
}

function nameOf({ label }: Setting): string {
  return /^\p{Lu}\p{Ll}/u.test(label) ? label[0].toLowerCase() + label.slice(1) : label;
}

/** Returns the unit after a space; a share "of" something reads better without. */
function unitOf({ unit }: Setting): string {
  return unit === "" || unit.startsWith("of ") ? "" : ` ${unitText(unit)}`;
}
