import type { ColourMap } from "./map";

/** For pO2: dark wine where oxygen is short, through red to a pale straw where it is plenty. */
export const garnet: ColourMap = {
  name: "garnet",
  quantity: "pO2",
  stops: [
    { lightness: 0.16, chroma: 0.05, hue: 345 },
    { lightness: 0.34, chroma: 0.105, hue: 362 },
    { lightness: 0.53, chroma: 0.125, hue: 384 },
    { lightness: 0.73, chroma: 0.105, hue: 414 },
    { lightness: 0.95, chroma: 0.05, hue: 450 },
  ],
};
