// What became of a voxel, and how each fate is drawn. The values are those of the fate buffer of a derive reply.

export type Treatment = "colour" | "paper" | "masked" | "hatch" | "negative";

export interface FateRow {
  value: number;
  treatment: Treatment;
  /** How the readout says that there is no value. */
  words: string;
}

export const fates: FateRow[] = [
  { value: 0, treatment: "paper", words: "outside the field of view" },
  { value: 1, treatment: "masked", words: "below the mask level" },
  { value: 2, treatment: "hatch", words: "no answer: no signal" },
  { value: 3, treatment: "colour", words: "" },
  { value: 4, treatment: "negative", words: "" },
  { value: 5, treatment: "hatch", words: "no answer: rate below the range" },
  { value: 6, treatment: "hatch", words: "no answer: rate above the range" },
  { value: 7, treatment: "hatch", words: "no answer: sign of the curve" },
];

const byValue = new Map(fates.map((row) => [row.value, row]));

/** Returns the row of a fate; a value the page does not know is drawn as no answer rather than as a value. */
export function fateOf(value: number): FateRow {
  return byValue.get(value) ?? { value, treatment: "hatch", words: `no answer (fate ${value})` };
}

/** Tells whether a voxel passed the mask, answered or not. */
export function insideMask(value: number): boolean {
  const { treatment } = fateOf(value);
  return treatment !== "paper" && treatment !== "masked";
}

/** Tells whether a voxel has a rate and, with a calibration, a pO2. */
export function hasValue(value: number): boolean {
  const { treatment } = fateOf(value);
  return treatment === "colour" || treatment === "negative";
}
