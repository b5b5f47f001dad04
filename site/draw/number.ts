// Numbers as text. A value is given no more digits than its error allows: two significant digits of the error, and
// the value to the same place.

/** Returns the decimals that show two significant digits of an error. */
export function decimalsFor(error: number): number {
  if (!(error > 0) || !Number.isFinite(error)) return 3;
  return Math.min(Math.max(1 - Math.floor(Math.log10(error)), 0), 8);
}

export function fixed(value: number, decimals: number): string {
  if (!Number.isFinite(value)) return "no answer";
  const text = value.toFixed(decimals);
  return minus(Number(text) === 0 ? text.replace("-", "") : text);
}

/** Returns "value ± error". */
export function withError(value: number, error: number): string {
  if (!(error > 0)) return significant(value, 3);
  const decimals = decimalsFor(error);
  return `${fixed(value, decimals)} ± ${fixed(error, decimals)}`;
}

/** Returns a number with so many significant digits, without an exponent between 1e-6 and 1e7. */
export function significant(value: number, digits = 3): string {
  if (!Number.isFinite(value)) return "no answer";
  if (value === 0) return "0";
  const size = Math.abs(value);
  if (size >= 1e7 || size < 1e-6) return minus(value.toExponential(digits - 1));
  const decimals = Math.max(digits - 1 - Math.floor(Math.log10(size)), 0);
  return minus(value.toFixed(Math.min(decimals, 12)));
}

/** Returns a number as plainly as it was entered: trailing zeros dropped. */
export function plain(value: number, digits = 6): string {
  return minus(String(Number(value.toPrecision(digits))));
}

export function percent(share: number): string {
  const value = share * 100;
  if (value === 0) return "0 %";
  if (value > 0 && value < 0.1) return "< 0.1 %";
  return `${value.toFixed(value < 10 ? 1 : 0)} %`;
}

export function count(n: number): string {
  return String(n).replace(/\B(?=(\d{3})+$)/g, "\u202f");
}

export function seconds(s: number): string {
  return s < 10 ? `${s.toFixed(2)} s` : `${s.toFixed(0)} s`;
}

export function bytes(n: number): string {
  const units = ["B", "KiB", "MiB", "GiB"];
  const at = Math.min(Math.floor(Math.log2(Math.max(n, 1)) / 10), 3);
  return `${(n / 1024 ** at).toFixed(at === 0 ? 0 : 1)} ${units[at]}`;
}

/** Returns a unit as it is printed: "1/us" as "1/µs", "1/mm3" as "1/mm³". */
export function unitText(unit: string): string {
  return unit
    .replace(/\bus\b/g, "µs")
    .replace(/mm2\b/g, "mm²")
    .replace(/mm3\b/g, "mm³");
}

function minus(text: string): string {
  return text.replace(/-/g, "\u2212");
}
