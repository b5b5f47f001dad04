// The colour maps of the page. To add one: a file with its stops and a row here.

import { garnet } from "./garnet";
import { graphite } from "./graphite";
import { tableOf, type ColourMap, type Quantity } from "./map";
import { verdigris } from "./verdigris";

export const colourMaps: ColourMap[] = [graphite, verdigris, garnet];

const tables = new Map<Quantity, Uint32Array>();

/** Returns the colour table that a quantity is drawn with. */
export function tableFor(quantity: Quantity): Uint32Array {
  let table = tables.get(quantity);
  if (!table) {
    table = tableOf(colourMaps.find((map) => map.quantity === quantity)!);
    tables.set(quantity, table);
  }
  return table;
}

export { tableSize, type ColourMap, type Quantity } from "./map";
