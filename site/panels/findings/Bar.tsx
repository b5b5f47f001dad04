// The scale of the map of shots.

import { useEffect, useRef } from "preact/hooks";
import { tableFor, tableSize } from "../../draw/colour";
import { percent, plain, unitText } from "../../draw/number";
import { ticksOf, type Window } from "../../draw/window";
import type { Series } from "../../wire.gen";

export function Bar({ series, window }: { series: Series; window: Window }) {
  const strip = useRef<HTMLCanvasElement>(null);
  useEffect(() => {
    const pixels = new ImageData(tableSize, 1);
    new Uint32Array(pixels.data.buffer).set(tableFor("rate"));
    strip.current!.getContext("2d")!.putImageData(pixels, 0, 0);
  }, []);
  const place = (value: number) => (100 * (value - window.low)) / (window.high - window.low || 1);
  const beyond = series.values.filter((v) => v < window.low || v > window.high).length;
  const unit = unitText(series.unit);
  return (
    <div class="bar">
      <canvas class="bar-colours" ref={strip} width={tableSize} height={1} aria-hidden="true" />
      <div class="ticks" aria-hidden="true">
        {ticksOf(window, 4).map((value) => (
          <span key={value} style={{ left: `${place(value)}%` }}>
            {plain(value, 6)}
          </span>
        ))}
      </div>
      <p class="bar-title">
        {series.label}
        {unit && ` in ${unit}`}, {plain(window.low, 4)} to {plain(window.high, 4)};{" "}
        {percent(beyond / Math.max(series.values.length, 1))} of the shots beyond
      </p>
    </div>
  );
}
