// A map on a canvas: the slice at voxel size scaled up without smoothing, then what colour alone must not say
// (patterns, marks), then the frame of reference (mask edge, scale bar, axes, cursor) at screen resolution.

import { insideMask } from "./fate";
import { axesOf, axisNames, type Triple } from "./grid";
import { paint, walk, type Colouring, type Painted, type SliceOf } from "./slice";
import { packedTone, type Tones } from "./tones";
import { niceStep } from "./window";

export interface Scene extends SliceOf {
  cursor: Triple;
  colouring: Omit<Colouring, "masked" | "negative">;
  /** Fates whose border is drawn as the mask edge; null draws none. */
  edge: Uint8Array | null;
  tones: Tones;
}

/** A canvas prepared for drawing: lengths in CSS pixels, cells of one voxel. */
interface Sheet {
  pen: CanvasRenderingContext2D;
  size: number;
  cellU: number;
  cellV: number;
  left: number;
  top: number;
  scene: Scene;
}

/** Draws a scene on a canvas whose width and height are already set; returns the tally of the slice. */
export function drawScene(canvas: HTMLCanvasElement, scene: Scene): Painted {
  const sheet = sheetOf(canvas, scene);
  const { tones, colouring } = scene;
  const painted = paint(scene, {
    ...colouring,
    masked: packedTone(tones.masked),
    negative: packedTone(tones.negative),
  });
  sheet.pen.fillStyle = tones.paper;
  sheet.pen.fillRect(0, 0, sheet.size, sheet.size);
  drawPixels(sheet, painted);
  drawHatch(sheet, painted);
  drawNegativeMarks(sheet, painted);
  if (scene.edge) drawEdge(sheet, scene.edge);
  drawScaleBar(sheet);
  drawAxes(sheet);
  drawCursor(sheet);
  return painted;
}

/** Returns the voxel under a point of a square canvas, given as shares of its width and height. */
export function voxelUnder({ grid, plane, at }: SliceOf, shareX: number, shareY: number): Triple {
  const { u, v, w } = axesOf(plane);
  const across = Math.max(grid.n[u], grid.n[v]);
  const clamp = (i: number, axis: number) => Math.min(Math.max(Math.floor(i), 0), grid.n[axis] - 1);
  const voxel: Triple = [0, 0, 0];
  voxel[u] = clamp(shareX * across - (across - grid.n[u]) / 2, u);
  voxel[v] = clamp(grid.n[v] - (shareY * across - (across - grid.n[v]) / 2), v);
  voxel[w] = at;
  return voxel;
}

function sheetOf(canvas: HTMLCanvasElement, scene: Scene): Sheet {
  const pen = canvas.getContext("2d")!;
  const size = canvas.clientWidth || canvas.width;
  const scale = canvas.width / size;
  pen.setTransform(scale, 0, 0, scale, 0, 0);
  const { u, v } = axesOf(scene.plane);
  const [nu, nv] = [scene.grid.n[u], scene.grid.n[v]];
  const cell = size / Math.max(nu, nv);
  return { pen, size, cellU: cell, cellV: cell, left: (size - nu * cell) / 2, top: (size - nv * cell) / 2, scene };
}

let still: OffscreenCanvas | null = null;

function drawPixels({ pen, left, top, cellU, cellV }: Sheet, { pixels }: Painted): void {
  still ??= new OffscreenCanvas(1, 1);
  still.width = pixels.width;
  still.height = pixels.height;
  still.getContext("2d")!.putImageData(pixels, 0, 0);
  pen.imageSmoothingEnabled = false;
  pen.drawImage(still, left, top, pixels.width * cellU, pixels.height * cellV);
}

function drawHatch(sheet: Sheet, { hatched }: Painted): void {
  if (hatched.length === 0) return;
  const { pen, size, scene } = sheet;
  pen.save();
  pen.beginPath();
  for (const [column, row] of hatched) pen.rect(...cellRect(sheet, column, row));
  pen.clip();
  pen.strokeStyle = scene.tones.hatch;
  pen.lineWidth = 1;
  pen.beginPath();
  for (let at = -size; at < size; at += 4) {
    pen.moveTo(at, size);
    pen.lineTo(at + size, 0);
  }
  pen.stroke();
  pen.restore();
}

function drawNegativeMarks(sheet: Sheet, { negative }: Painted): void {
  if (sheet.cellU < 3) return;
  const { pen, scene } = sheet;
  pen.fillStyle = scene.tones.paper;
  for (const [column, row] of negative) {
    const [x, y, w, h] = cellRect(sheet, column, row);
    pen.fillRect(x + w * 0.25, y + h / 2 - 0.5, w * 0.5, 1);
  }
}

function cellRect({ left, top, cellU, cellV }: Sheet, column: number, row: number): [number, number, number, number] {
  return [left + column * cellU, top + row * cellV, cellU, cellV];
}

function drawEdge(sheet: Sheet, fate: Uint8Array): void {
  const { scene, pen } = sheet;
  const across = scene.grid.n[axesOf(scene.plane).u];
  const inside: boolean[] = [];
  walk(scene, (index) => inside.push(insideMask(fate[index])));
  pen.beginPath();
  inside.forEach((here, i) => {
    const [x, y, w, h] = cellRect(sheet, i % across, Math.floor(i / across));
    if (i % across > 0 && inside[i - 1] !== here) line(pen, x, y, x, y + h);
    if (i >= across && inside[i - across] !== here) line(pen, x, y, x + w, y);
  });
  strokeTwice(pen, scene.tones);
}

function line(pen: CanvasRenderingContext2D, x0: number, y0: number, x1: number, y1: number): void {
  pen.moveTo(x0, y0);
  pen.lineTo(x1, y1);
}

function drawScaleBar({ pen, size, cellU, scene }: Sheet): void {
  const { grid, plane, tones } = scene;
  const perMM = cellU / grid.voxelMM[axesOf(plane).u];
  const lengthMM = niceStep((size * 0.09) / perMM);
  const [x, y] = [6, size - 7];
  pen.fillStyle = tones.ink;
  pen.fillRect(x, y, lengthMM * perMM, 2);
  label(pen, tones, `${lengthMM} mm`, x, y - 4, "left");
}

function drawAxes({ pen, size, scene }: Sheet): void {
  const { u, v } = axesOf(scene.plane);
  label(pen, scene.tones, `${axisNames[u]} →`, size - 5, size - 6, "right");
  label(pen, scene.tones, `${axisNames[v]} ↑`, 6, 13, "left");
}

function label(
  pen: CanvasRenderingContext2D,
  tones: Tones,
  text: string,
  x: number,
  y: number,
  align: CanvasTextAlign,
): void {
  pen.font = "11px " + getComputedStyle(document.body).fontFamily;
  pen.textAlign = align;
  pen.lineWidth = 3;
  pen.lineJoin = "round";
  pen.strokeStyle = tones.paper;
  pen.strokeText(text, x, y);
  pen.fillStyle = tones.ink;
  pen.fillText(text, x, y);
}

/** Marks the cursor by its voxel, short arms beside it and ticks at the border, so that little of the map is hidden. */
function drawCursor(sheet: Sheet): void {
  const { pen, size, scene } = sheet;
  const { u, v } = axesOf(scene.plane);
  const [x, y, w, h] = cellRect(sheet, scene.cursor[u], scene.grid.n[v] - 1 - scene.cursor[v]);
  const [cx, cy] = [x + w / 2, y + h / 2];
  const [tick, gap, arm] = [9, w / 2 + 3, w / 2 + 12];
  pen.beginPath();
  pen.rect(x - 0.5, y - 0.5, w + 1, h + 1);
  for (const [from, to] of [
    [0, tick],
    [size - tick, size],
    [cx - arm, cx - gap],
    [cx + gap, cx + arm],
  ]) {
    line(pen, from, cy, to, cy);
  }
  for (const [from, to] of [
    [0, tick],
    [size - tick, size],
    [cy - arm, cy - gap],
    [cy + gap, cy + arm],
  ]) {
    line(pen, cx, from, cx, to);
  }
  strokeTwice(pen, scene.tones);
}

function strokeTwice(pen: CanvasRenderingContext2D, tones: Tones): void {
  pen.strokeStyle = tones.paper;
  pen.globalAlpha = 0.6;
  pen.lineWidth = 2.5;
  pen.stroke();
  pen.globalAlpha = 1;
  pen.strokeStyle = tones.cursor;
  pen.lineWidth = 1;
  pen.stroke();
}
