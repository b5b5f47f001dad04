import type { ColourMap } from "./map";

/** For rates: copper under patina, from a deep ink green to pale. */
export const verdigris: ColourMap = {
  name: "verdigris",
  quantity: "rate",
  stops: [
    { lightness: 0.17, chroma: 0.035, hue: 255 },
    { lightness: 0.36, chroma: 0.062, hue: 232 },
    { lightness: 0.56, chroma: 0.078, hue: 205 },
    { lightness: 0.76, chroma: 0.074, hue: 180 },
    { lightness: 0.95, chroma: 0.04, hue: 150 },
  ],
};
