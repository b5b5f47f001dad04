// Directions of gradients as places on a flat map: the half sphere in Lambert's equal-area projection, so that evenly
// spread directions look evenly spread; in 2D the half circle itself. A direction and its opposite have the same place,
// because they see the same projection from either end.
// Source: Snyder, Map Projections: A Working Manual (1987), equations 24-3 and 24-4 for the polar aspect.

import { tableSize } from "./colour";
import type { Tones } from "./tones";
import type { Window } from "./window";

export type Place = [x: number, y: number];

/** Returns where a direction lies on the unit disc (3D: its edge is the equator) or on the upper half circle (2D). */
export function placeOf([gx, gy, gz]: number[], dim: number): Place {
  const size = Math.hypot(gx, gy, gz) || 1;
  const [x, y, z] = [gx / size, gy / size, gz / size];
  const down = dim === 2 ? y < 0 || (y === 0 && x < 0) : z < 0 || (z === 0 && (y < 0 || (y === 0 && x < 0)));
  const [u, v, w] = down ? [-x, -y, -z] : [x, y, z];
  if (dim === 2) return [u, v];
  const shrink = 1 / Math.sqrt(1 + w); // sqrt(2)·sin(θ/2) over sin θ, with cos θ = w
  return [u * shrink, v * shrink];
}

/** Returns the place that is nearest to one of the others in a direction of the map, or undefined at its edge. */
export function nextPlace(places: Place[], from: number, dx: number, dy: number): number | undefined {
  let best: number | undefined;
  let least = Infinity;
  places.forEach(([x, y], i) => {
    const [ax, ay] = [x - places[from][0], y - places[from][1]];
    const along = ax * dx + ay * dy;
    const across = Math.abs(ax * dy - ay * dx);
    // Within 45° of the direction asked for; what lies aside counts double.
    if (i === from || along <= 0 || across > along) return;
    const far = along + 2 * across;
    if (far < least) [best, least] = [i, far];
  });
  return best;
}

export interface Dot {
  place: Place;
  /** What colours it; null where there is no value. */
  value: number | null;
  leftOut: boolean;
  /** A finding names it. */
  named: boolean;
}

export interface SphereScene {
  dots: Dot[];
  dim: number;
  chosen: number;
  window: Window;
  table: Uint32Array;
  tones: Tones;
}

/** Height of the map over its width. */
export const heightShare = (dim: number) => (dim === 2 ? 0.56 : 1);

const margin = 0.93; // of half the width

function pixelOf([x, y]: Place, dim: number, width: number): Place {
  const half = width / 2;
  const base = dim === 2 ? width * heightShare(2) - half * (1 - margin) : half;
  return [half + x * half * margin, base - y * half * margin];
}

export function drawSphere(canvas: HTMLCanvasElement, scene: SphereScene): void {
  const pen = canvas.getContext("2d")!;
  const { width } = canvas;
  const size = dotSize(scene, width);
  pen.clearRect(0, 0, width, canvas.height);
  drawEdge(pen, scene, width);
  scene.dots.forEach((dot, i) => i !== scene.chosen && drawDot(pen, scene, dot, width, size));
  const chosen = scene.dots[scene.chosen];
  if (!chosen) return;
  drawDot(pen, scene, chosen, width, size * 1.25);
  ring(pen, pixelOf(chosen.place, scene.dim, width), size * 2.1, scene.tones.cursor, size * 0.5);
}

/** Dots cover about a third of the map, and are never too small to see. */
function dotSize({ dots, dim }: SphereScene, width: number): number {
  const room = dim === 2 ? (0.4 * width * Math.PI) / Math.max(dots.length, 1) / 2 : (0.3 * width) / Math.sqrt(dots.length || 1);
  return Math.min(Math.max(room, width * 0.0075), width * 0.016);
}

function drawEdge(pen: CanvasRenderingContext2D, { dim, tones }: SphereScene, width: number): void {
  pen.strokeStyle = tones.hatch;
  pen.lineWidth = Math.max(1, width / 400);
  pen.globalAlpha = 0.6;
  const [x, y] = pixelOf([0, 0], dim, width);
  pen.beginPath();
  pen.arc(x, y, (width / 2) * margin, dim === 2 ? Math.PI : 0, 2 * Math.PI);
  if (dim === 2) pen.closePath();
  else {
    pen.moveTo(x - width * 0.012, y);
    pen.lineTo(x + width * 0.012, y);
    pen.moveTo(x, y - width * 0.012);
    pen.lineTo(x, y + width * 0.012);
  }
  pen.stroke();
  pen.globalAlpha = 1;
}

function drawDot(pen: CanvasRenderingContext2D, scene: SphereScene, dot: Dot, width: number, size: number): void {
  const at = pixelOf(dot.place, scene.dim, width);
  const { tones } = scene;
  if (dot.leftOut || dot.value === null) {
    ring(pen, at, size, tones.hatch, Math.max(1, size * 0.3));
    if (dot.leftOut) cross(pen, at, size * 1.5, tones.ink, Math.max(1, size * 0.45));
  } else {
    pen.fillStyle = colourOf(scene, dot.value);
    pen.beginPath();
    pen.arc(at[0], at[1], size, 0, 2 * Math.PI);
    pen.fill();
    ring(pen, at, size, tones.ink, Math.max(0.5, size * 0.12));
  }
  if (dot.named) diamond(pen, at, size * 2.2, tones.ink, Math.max(1, size * 0.3));
}

function ring(pen: CanvasRenderingContext2D, [x, y]: Place, radius: number, colour: string, line: number): void {
  pen.strokeStyle = colour;
  pen.lineWidth = line;
  pen.beginPath();
  pen.arc(x, y, radius, 0, 2 * Math.PI);
  pen.stroke();
}

function cross(pen: CanvasRenderingContext2D, [x, y]: Place, reach: number, colour: string, line: number): void {
  pen.strokeStyle = colour;
  pen.lineWidth = line;
  pen.beginPath();
  pen.moveTo(x - reach, y - reach);
  pen.lineTo(x + reach, y + reach);
  pen.moveTo(x - reach, y + reach);
  pen.lineTo(x + reach, y - reach);
  pen.stroke();
}

function diamond(pen: CanvasRenderingContext2D, [x, y]: Place, reach: number, colour: string, line: number): void {
  pen.strokeStyle = colour;
  pen.lineWidth = line;
  pen.beginPath();
  pen.moveTo(x, y - reach);
  pen.lineTo(x + reach, y);
  pen.lineTo(x, y + reach);
  pen.lineTo(x - reach, y);
  pen.closePath();
  pen.stroke();
}

function colourOf({ window, table }: SphereScene, value: number): string {
  const share = (value - window.low) / (window.high - window.low || 1);
  const pixel = table[Math.min(Math.max(Math.round(share * (tableSize - 1)), 0), tableSize - 1)];
  return `rgb(${pixel & 255} ${(pixel >> 8) & 255} ${(pixel >> 16) & 255})`;
}

/** Returns the dot nearest to a point given as shares of width and height, if it is within reach of a finger. */
export function dotUnder({ dots, dim }: SphereScene, shareX: number, shareY: number, width: number): number | undefined {
  const [px, py] = [shareX * width, shareY * width * heightShare(dim)];
  let best: number | undefined;
  let least = 16; // pixels
  dots.forEach(({ place }, i) => {
    const [x, y] = pixelOf(place, dim, width);
    const far = Math.hypot(x - px, y - py);
    if (far < least) [best, least] = [i, far];
  });
  return best;
}
