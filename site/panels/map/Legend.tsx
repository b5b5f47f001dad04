// What became of the voxels: how each fate is drawn, and how many there are.

import { fateOf } from "../../draw/fate";
import { count } from "../../draw/number";
import type { Strand } from "../../store/strand";
import type { FateCount } from "../../wire.gen";

export function Legend({ strand }: { strand: Strand }) {
  const derived = strand.oxygen.value?.derived;
  if (!derived) return null;
  return (
    <ul class="legend" aria-label="how voxels are drawn, and how many there are">
      {derived.fates
        .filter((fate) => isShown(fate, derived.pO2 !== null))
        .map(({ value, label, count: n }) => (
          <li key={value} data-fate={value}>
            <span class="swatch" data-treatment={fateOf(value).treatment} aria-hidden="true" />
            {label} <b>{count(n)}</b>
          </li>
        ))}
      <li>
        <span class="swatch" data-treatment="edge" aria-hidden="true" />
        edge of the mask on the amplitude
      </li>
    </ul>
  );
}

/** Reasons for no answer are listed only where they occur; what every map has is always listed. */
function isShown({ value, count: n }: FateCount, calibrated: boolean): boolean {
  const { treatment } = fateOf(value);
  return n > 0 || (treatment !== "hatch" && (calibrated || treatment !== "negative"));
}
