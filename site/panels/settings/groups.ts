// How the form is ordered: which group each setting belongs to, what is open, and what stands aside.

import type { Setting } from "../../wire.gen";

export interface SettingGroup {
  name: string;
  settings: Setting[];
  isCalibration: boolean;
}

/** Groups that are open to begin with: what nearly everybody looks at. */
export const openGroups = ["Reconstruction", "Calibration", "Mask"];

const calibrationBranch = "calibration.";

/** What a conversion cannot do without; the rest of the calibration stands aside. */
const calibrationCore = ["calibration.rate", "calibration.zeroPerUS", "calibration.slopePerUSPerTorr"];

/** Tells whether a setting is folded away within its group. */
export function isAside(path: string): boolean {
  return path.startsWith(calibrationBranch) && !calibrationCore.includes(path);
}

/** Tells whether a number may be left empty, which says the same as 0: not known, or not corrected for. */
export function mayBeEmpty(path: string): boolean {
  return isAside(path) || path.startsWith("sample.");
}

/** Returns the settings by group, both in the order of the catalogue. */
export function groupsOf(catalogue: Setting[]): SettingGroup[] {
  const groups = new Map<string, SettingGroup>();
  for (const setting of catalogue) {
    const { group: name, path } = setting;
    const group = groups.get(name) ?? { name, settings: [], isCalibration: path.startsWith(calibrationBranch) };
    group.settings.push(setting);
    groups.set(name, group);
  }
  return [...groups.values()];
}
