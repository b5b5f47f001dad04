// Leaves of a recipe by path, as the catalogue names them: "reconstruction.window".

import type { Recipe } from "../wire.gen";

type Tree = { [key: string]: unknown };

/** Returns the value at a path, or undefined when the recipe has no such branch. */
export function valueAt(recipe: Recipe, path: string): unknown {
  return path.split(".").reduce<unknown>((tree, key) => (tree as Tree | null | undefined)?.[key], recipe);
}

/** Returns a copy of the recipe with one leaf changed. */
export function withValue(recipe: Recipe, path: string, value: unknown): Recipe {
  return changed(recipe as unknown as Tree, path.split("."), value) as unknown as Recipe;
}

function changed(tree: Tree, [key, ...rest]: string[], value: unknown): Tree {
  return { ...tree, [key]: rest.length === 0 ? value : changed((tree[key] ?? {}) as Tree, rest, value) };
}
