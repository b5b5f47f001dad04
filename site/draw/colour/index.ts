// The colour maps of the page. To add one: a file with its stops and a row here.

import { garnet } from "./garnet";
import { graphite } from "./graphite";
import { tableOf, type ColourMap, type Quantity } from "./map";
import { verdigris } from "./verdigris";

export const colourMaps: ColourMap[] = [graphite, verdigris, garnet];

const tables = new Map(colourMaps.map((map) => [map.quantity, tableOf(map)]));

/** Returns the colour table that a quantity is drawn with. */
export function tableFor(quantity: Quantity): Uint32Array {
  return tables.get(quantity)!;
}

export { tableSize, type ColourMap, type Quantity } from "./map";
