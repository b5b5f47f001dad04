// A recipe as text, and its leaves by path, as the catalogue names them: "reconstruction.window".

import type { Recipe } from "../wire.gen";

type Tree = { [key: string]: unknown };

/** Returns the value at a path, or undefined when the recipe has no such branch. */
export function valueAt(recipe: Recipe, path: string): unknown {
  return path.split(".").reduce<unknown>((tree, key) => (tree as Tree | null | undefined)?.[key], recipe);
}

/** Tells whether two values of a setting are the same; lists are by what they hold. */
export function sameValue(a: unknown, b: unknown): boolean {
  return a === b || JSON.stringify(a) === JSON.stringify(b);
}

/** Returns a copy of the recipe with one leaf changed. */
export function withValue(recipe: Recipe, path: string, value: unknown): Recipe {
  return changed(recipe as unknown as Tree, path.split("."), value) as unknown as Recipe;
}

function changed(tree: Tree, [key, ...rest]: string[], value: unknown): Tree {
  return { ...tree, [key]: rest.length === 0 ? value : changed((tree[key] ?? {}) as Tree, rest, value) };
}

/**
 * Returns the recipe as JSON text, the form in which it is checked and saved. A calibration that is not there is said
 * in so many words, because what a text leaves out is taken from the defaults of the data.
 */
export function textOf(recipe: Recipe, indent = 0): string {
  return JSON.stringify({ ...recipe, calibration: recipe.calibration ?? null }, null, indent);
}
