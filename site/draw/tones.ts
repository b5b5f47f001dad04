// The few colours that canvases share with the style sheet. They are read from it, so that light, dark and forced
// colours have one source.

export interface Tones {
  paper: string;
  ink: string;
  masked: string;
  hatch: string;
  negative: string;
  cursor: string;
}

const names: (keyof Tones)[] = ["paper", "ink", "masked", "hatch", "negative", "cursor"];

/** Returns the tones as the style sheet has them now. */
export function readTones(): Tones {
  const style = getComputedStyle(document.documentElement);
  return Object.fromEntries(names.map((name) => [name, style.getPropertyValue(`--tone-${name}`)])) as unknown as Tones;
}

let probe: CanvasRenderingContext2D | null = null;

/** Returns a CSS colour as one packed pixel, red in the lowest byte. */
export function packedTone(colour: string): number {
  probe ??= new OffscreenCanvas(1, 1).getContext("2d", {
    willReadFrequently: true,
  }) as unknown as CanvasRenderingContext2D;
  probe.clearRect(0, 0, 1, 1);
  probe.fillStyle = colour;
  probe.fillRect(0, 0, 1, 1);
  return new Uint32Array(probe.getImageData(0, 0, 1, 1).data.buffer)[0];
}
