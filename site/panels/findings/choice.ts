// Which number per shot colours the map and runs over the order.

import { signal } from "@preact/signals";

export const seriesName = signal("strength");
