// The scale of a map: colours, ticks, unit, the window as numbers to change, and the share of the slice beyond it.

import { useEffect, useRef, useState } from "preact/hooks";
import { tableFor, tableSize, type Quantity } from "../../draw/colour";
import { percent, plain as plainly, unitText } from "../../draw/number";
import type { Painted } from "../../draw/slice";
import { ticksOf, type Window } from "../../draw/window";
import { strands } from "../../store/strand";
import { frameIndex, oneWindowForFrames, setWindows, windowOf } from "../../store/view";
import { amplitudeUnit } from "../view/readout";

interface Props {
  /** Sets the ids of this bar apart from those of every other. */
  id: string;
  quantity: Quantity;
  title: string;
  tally: Painted | null;
  /** Leaves the inputs away. */
  plain: boolean;
}

export function ColourBar({ id, quantity, title, tally, plain }: Props) {
  const window = windowOf(quantity);
  return (
    <div class="bar">
      <Colours quantity={quantity} />
      <Ticks window={window} />
      <p class="bar-title">{barTitle(quantity, title)}</p>
      {!plain && <WindowInputs id={id} quantity={quantity} title={title} window={window} />}
      <p class="clipped" data-clipped={quantity}>
        {tally ? clippedWords(tally) : ""}
      </p>
      {!plain && quantity === "amplitude" && <FrameSwitch id={id} />}
    </div>
  );
}

/** Returns quantity and unit; of an amplitude image also its frame. */
function barTitle(quantity: Quantity, title: string): string {
  if (quantity !== "amplitude") return `${title} in ${quantity === "rate" ? unitText("1/us") : "torr"}`;
  const timeUS = strands.value[0]?.plan.value?.frames.timeUS ?? [];
  const us = plainly(timeUS[frameIndex(timeUS)] ?? 0, 4);
  return `${title} at ${us} µs in signal ${amplitudeUnit()}`;
}

function Colours({ quantity }: { quantity: Quantity }) {
  const strip = useRef<HTMLCanvasElement>(null);
  useEffect(() => {
    const pixels = new ImageData(tableSize, 1);
    new Uint32Array(pixels.data.buffer).set(tableFor(quantity));
    strip.current!.getContext("2d")!.putImageData(pixels, 0, 0);
  }, [quantity]);
  return <canvas class="bar-colours" ref={strip} width={tableSize} height={1} aria-hidden="true" />;
}

function Ticks({ window }: { window: Window }) {
  const place = (value: number) => (100 * (value - window.low)) / (window.high - window.low || 1);
  return (
    <div class="ticks" aria-hidden="true">
      {ticksOf(window, 5).map((value) => (
        <span key={value} style={{ left: `${place(value)}%` }}>
          {plainly(value, 4)}
        </span>
      ))}
    </div>
  );
}

function WindowInputs({
  id,
  quantity,
  title,
  window,
}: {
  id: string;
  quantity: Quantity;
  title: string;
  window: Window;
}) {
  const automatic = setWindows[quantity].value === null;
  const [wrong, setWrong] = useState(false);
  const enter = (end: "low" | "high", text: string) => {
    const next = { ...window, [end]: Number(text) };
    const fits = text.trim() !== "" && next.low < next.high;
    setWrong(!fits);
    if (fits) setWindows[quantity].value = next;
  };
  const reset = () => {
    setWrong(false);
    setWindows[quantity].value = null;
  };
  return (
    <div class="window" role="group" aria-label={`window of the ${title} map`}>
      <WindowEnd
        name={`${title} window from`}
        id={`window-${id}-low`}
        value={window.low}
        enter={(text) => enter("low", text)}
      />
      <span>to</span>
      <WindowEnd
        name={`${title} window to`}
        id={`window-${id}-high`}
        value={window.high}
        enter={(text) => enter("high", text)}
      />
      <button type="button" disabled={automatic && !wrong} onClick={reset} aria-label={`auto window for ${title}`}>
        auto
      </button>
      {wrong && <p class="fault">not taken: the first must be below the second</p>}
    </div>
  );
}

interface EndProps {
  name: string;
  id: string;
  value: number;
  enter: (text: string) => void;
}

function WindowEnd({ name, id, value, enter }: EndProps) {
  return (
    <input
      id={id}
      type="number"
      step="any"
      aria-label={name}
      value={Number(value.toPrecision(5))}
      onChange={(event) => enter(event.currentTarget.value)}
    />
  );
}

function FrameSwitch({ id }: { id: string }) {
  return (
    <label class="switch">
      <input
        id={`window-${id}-frames`}
        type="checkbox"
        checked={oneWindowForFrames.value}
        onChange={(event) => (oneWindowForFrames.value = event.currentTarget.checked)}
      />
      one auto window for all of these images
    </label>
  );
}

function clippedWords({ coloured, clippedLow, clippedHigh }: Painted): string {
  if (coloured === 0) return "no voxel with a value in this slice";
  if (clippedLow + clippedHigh === 0) return "nothing in this slice is beyond the window";
  const parts = [
    clippedLow > 0 ? `${percent(clippedLow / coloured)} below` : "",
    clippedHigh > 0 ? `${percent(clippedHigh / coloured)} above` : "",
  ];
  return `in this slice ${parts.filter(Boolean).join(", ")} the window`;
}
