import type { ColourMap } from "./map";

/** Neutral, for amplitudes: a little cool in the shadows, so that it reads as one material with the page. */
export const graphite: ColourMap = {
  name: "graphite",
  quantity: "amplitude",
  stops: [
    { lightness: 0.15, chroma: 0.012, hue: 240 },
    { lightness: 0.56, chroma: 0.008, hue: 230 },
    { lightness: 0.97, chroma: 0.002, hue: 220 },
  ],
};
