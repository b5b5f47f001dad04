// OKLCH to sRGB. Lightness, chroma and hue are varied in this space because equal distances in it look about equally
// large. Source: B. Ottosson, "A perceptual color space for image processing" (2020), matrices M1 and M2.

export type Lab = [lightness: number, a: number, b: number];
export type Rgb = [red: number, green: number, blue: number];

/** Returns the rectangular coordinates of a colour given by lightness 0..1, chroma and hue in degrees. */
export function labOf(lightness: number, chroma: number, hue: number): Lab {
  const angle = (hue * Math.PI) / 180;
  return [lightness, chroma * Math.cos(angle), chroma * Math.sin(angle)];
}

/** Returns linear-light sRGB, which may lie outside 0..1. */
export function linearOf([lightness, a, b]: Lab): Rgb {
  const l = (lightness + 0.3963377774 * a + 0.2158037573 * b) ** 3;
  const m = (lightness - 0.1055613458 * a - 0.0638541728 * b) ** 3;
  const s = (lightness - 0.0894841775 * a - 1.291485548 * b) ** 3;
  return [
    4.0767416621 * l - 3.3077115913 * m + 0.2309699292 * s,
    -1.2684380046 * l + 2.6097574011 * m - 0.3413193965 * s,
    -0.0041960863 * l - 0.7034186147 * m + 1.707614701 * s,
  ];
}

/** Returns sRGB bytes, with the chroma lowered as far as needed for the colour to be showable at its lightness. */
export function bytesOf(lab: Lab): Rgb {
  return linearOf(showable(lab)).map(encode) as Rgb;
}

function showable(lab: Lab): Lab {
  if (fits(linearOf(lab))) return lab;
  let [shown, lost] = [0, 1];
  for (let halving = 0; halving < 10; halving++) {
    const middle = (shown + lost) / 2;
    if (fits(linearOf(withChroma(lab, middle)))) shown = middle;
    else lost = middle;
  }
  return withChroma(lab, shown);
}

function withChroma([lightness, a, b]: Lab, share: number): Lab {
  return [lightness, a * share, b * share];
}

function fits(linear: Rgb): boolean {
  return linear.every((v) => v >= -1e-4 && v <= 1 + 1e-4);
}

function encode(linear: number): number {
  const v = Math.min(Math.max(linear, 0), 1);
  return Math.round(255 * (v <= 0.0031308 ? 12.92 * v : 1.055 * v ** (1 / 2.4) - 0.055));
}
