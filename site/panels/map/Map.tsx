// One map of a strand: the slice through the cursor, its colour bar, and the value at the cursor.

import { useEffect, useRef, useState } from "preact/hooks";
import { tableFor, type Quantity } from "../../draw/colour";
import { axesOf, sameGrid, voxelAt, type Grid } from "../../draw/grid";
import { drawScene, voxelUnder, type Scene } from "../../draw/scene";
import type { Painted } from "../../draw/slice";
import { tones } from "../../store/appearance";
import { isCoarse, isOlder, stageNames, strands, type Strand } from "../../store/strand";
import { cursorMM, frameShown, plane, pointAt, windowOf } from "../../store/view";
import { useWidth } from "../chart/Chart";
import { valueAt } from "../view/readout";
import { ColourBar } from "./ColourBar";
import { steer } from "./steer";

interface Props {
  strand: Strand;
  quantity: Quantity;
  title: string;
  /** Leaves away what all strands share and another one shows: the inputs of the window. */
  plain: boolean;
}

const stageOf = { amplitude: "reconstruct", rate: "fit", pO2: "derive" } as const;

export function Map({ strand, quantity, title, plain }: Props) {
  const [tally, setTally] = useState<Painted | null>(null);
  const scene = sceneOf(strand, quantity);
  const older = isOlder(strand, stageOf[quantity]);
  const coarse = isCoarse(strand, stageOf[quantity]);
  return (
    <figure class="map" data-map={quantity} data-older={older || undefined} data-coarse={coarse || undefined}>
      {(older || coarse) && <p class="older">{older ? "older than the settings" : coarseWords(strand)}</p>}
      <Canvas scene={scene} hint={`map-keys-${strands.value[0].id}`} label={`${title} map`} tell={setTally} />
      <p class="at-cursor">
        at the cursor <b data-value={quantity}>{valueAt(strand, quantity)}</b>
      </p>
      <ColourBar
        id={`${strand.id}-${quantity}`}
        quantity={quantity}
        title={title}
        tally={scene ? tally : null}
        plain={plain}
      />
    </figure>
  );
}

function coarseWords({ stages }: Strand): string {
  const failed = stageNames.some((name) => stages[name].value.state === "failed");
  return failed ? "coarse" : "coarse, full image is being made";
}

/** Returns what is to be drawn, or null while there is nothing. */
function sceneOf(strand: Strand, quantity: Quantity): Scene | null {
  const shown = valuesOf(strand, quantity);
  if (!shown) return null;
  const { grid, values } = shown;
  const cursor = voxelAt(grid, cursorMM.value);
  const oxygen = strand.oxygen.value;
  const fate = oxygen && sameGrid(oxygen.grid, grid) ? oxygen.fate : null;
  const masked = quantity !== "amplitude";
  return {
    grid,
    plane: plane.value,
    at: cursor[axesOf(plane.value).w],
    cursor,
    colouring: {
      values,
      fate: masked ? fate : null,
      window: windowOf(quantity),
      table: tableFor(quantity),
      negatives: quantity === "pO2",
    },
    edge: masked ? null : fate,
    tones: tones.value,
  };
}

function valuesOf(strand: Strand, quantity: Quantity): { grid: Grid; values: Float32Array } | null {
  const [images, rates, oxygen] = [strand.images.value, strand.rates.value, strand.oxygen.value];
  if (quantity === "pO2") return oxygen?.pO2 ? { grid: oxygen.grid, values: oxygen.pO2 } : null;
  if (quantity === "rate") return rates && { grid: rates.grid, values: rates.rate };
  const values = frameShown(images);
  return images && values ? { grid: images.grid, values } : null;
}

interface CanvasProps {
  scene: Scene | null;
  label: string;
  hint: string;
  tell: (painted: Painted) => void;
}

function Canvas({ scene, label, hint, tell }: CanvasProps) {
  const canvas = useRef<HTMLCanvasElement>(null);
  const width = useWidth(canvas);
  useEffect(
    () => {
      if (!scene || width <= 0) return;
      const pixels = Math.round(width * devicePixelRatio);
      if (canvas.current!.width !== pixels) canvas.current!.width = canvas.current!.height = pixels;
      const painted = drawScene(canvas.current!, scene);
      tell(painted);
    },
    sceneParts(scene, width),
  );
  const point = (event: PointerEvent) => scene && pointFrom(event, scene);
  return (
    <canvas
      ref={canvas}
      tabIndex={0}
      role="application"
      aria-label={label}
      aria-describedby={hint}
      data-drawn={scene ? "" : undefined}
      onPointerDown={(event) => {
        event.currentTarget.setPointerCapture(event.pointerId);
        point(event);
      }}
      onPointerMove={(event) => event.buttons & 1 && point(event)}
      onKeyDown={(event) => scene && steer(event, scene.grid)}
    />
  );
}

/** Returns what a drawing depends on, so that it is not made again for anything else. */
function sceneParts(scene: Scene | null, width: number): unknown[] {
  if (!scene) return [width];
  const { colouring, plane, cursor, edge, tones } = scene;
  const { values, fate, window } = colouring;
  return [width, values, fate, window, plane, cursor.join(), edge, tones];
}

function pointFrom(event: PointerEvent, scene: Scene): void {
  const box = (event.currentTarget as HTMLCanvasElement).getBoundingClientRect();
  const voxel = voxelUnder(scene, (event.clientX - box.left) / box.width, (event.clientY - box.top) / box.height);
  pointAt(scene.grid, voxel);
}
