// The shots as dots at their directions. One is chosen, here or by its number; it can be left out of every variant.

import { useEffect, useRef } from "preact/hooks";
import { tableFor } from "../../draw/colour";
import { significant, unitText } from "../../draw/number";
import { dotUnder, drawSphere, heightShare, nextPlace, placeOf, type Dot, type SphereScene } from "../../draw/sphere";
import { quantilesOf, rounded } from "../../draw/window";
import { tones } from "../../store/appearance";
import { leftOut, setLeftOut } from "../../store/findings";
import { directions, type Directions } from "../../store/shotview";
import { shot } from "../../store/view";
import type { Report, Series } from "../../wire.gen";
import { useWidth } from "../chart/Chart";
import { Bar } from "./Bar";
import { Pick } from "./Pick";
import { ShotTable } from "./ShotTable";
import { seriesName } from "./choice";

export function ShotMap({ report }: { report: Report }) {
  const known = directions.value;
  if (!known) return <p class="words">The directions are being asked for.</p>;
  const series = report.series.find(({ name }) => name === seriesName.value) ?? report.series[0];
  const scene = sceneOf(known, report, series);
  return (
    <section class="shot-map" aria-labelledby="shot-map-title">
      <h3 id="shot-map-title">Shots by direction</h3>
      <Pick report={report} />
      <Canvas scene={scene} known={known} />
      <p class="live" aria-live="polite" data-shot-words>
        {wordsOf(report, series)}
      </p>
      {series && <Bar series={series} window={scene.window} />}
      <p class="hint" id="shot-map-keys">
        Each dot is an axis: {known.dim === 3 ? "the half sphere in an equal-area projection" : "the half circle"}; a shot
        and its opposite have one place. Crossed ring: left out. Diamond: named by a finding. Arrows go to the nearest dot
        that way, Page Up and Page Down through the order, Enter or Space leaves out or takes back, and so does a second
        click.
      </p>
      <ShotTable report={report} known={known} />
    </section>
  );
}

function sceneOf(known: Directions, report: Report, series: Series | undefined): SphereScene {
  const named = new Set(report.findings.flatMap(({ level, shots }) => (level === "fine" ? [] : shots)));
  const valueOf = new Map(report.shots.map((s, i) => [s, series?.values[i] ?? null]));
  const dots: Dot[] = known.shots.map((s) => ({
    place: placeOf(known.gradient[s], known.dim),
    value: leftOut.value.has(s) ? null : (valueOf.get(s) ?? null),
    leftOut: leftOut.value.has(s),
    named: named.has(s),
  }));
  const [low, high] = quantilesOf(Float32Array.from(series?.values ?? []), 0.01, 0.99);
  return {
    dots,
    dim: known.dim,
    chosen: known.shots.indexOf(shot.value),
    window: rounded(low, high),
    table: tableFor("rate"),
    tones: tones.value,
  };
}

function wordsOf({ shots }: Report, series: Series | undefined): string {
  const at = shots.indexOf(shot.value);
  const out = leftOut.value.has(shot.value);
  if (out) return `shot ${shot.value}: left out`;
  if (!series || at < 0) return `shot ${shot.value}: not one of the image`;
  const value = `${significant(series.values[at])} ${unitText(series.unit)}`.trim();
  return `shot ${shot.value}: in use; ${series.label} ${value}`;
}

function Canvas({ scene, known }: { scene: SphereScene; known: Directions }) {
  const canvas = useRef<HTMLCanvasElement>(null);
  const width = useWidth(canvas);
  useEffect(() => {
    if (width <= 0) return;
    const pixels = Math.round(width * devicePixelRatio);
    canvas.current!.width = pixels;
    canvas.current!.height = Math.round(pixels * heightShare(scene.dim));
    drawSphere(canvas.current!, scene);
  });
  return (
    <canvas
      ref={canvas}
      class="sphere"
      style={{ aspectRatio: `1 / ${heightShare(scene.dim)}` }}
      tabIndex={0}
      role="application"
      aria-label="map of the shots"
      aria-describedby="shot-map-keys"
      data-shots-drawn={scene.dots.length}
      onPointerDown={(event) => point(event, scene, known)}
      onKeyDown={(event) => steer(event, scene, known)}
    />
  );
}

function point(event: PointerEvent, scene: SphereScene, known: Directions): void {
  const box = (event.currentTarget as HTMLCanvasElement).getBoundingClientRect();
  const at = dotUnder(scene, (event.clientX - box.left) / box.width, (event.clientY - box.top) / box.height, box.width);
  if (at === undefined) return;
  if (at === scene.chosen) toggle();
  else shot.value = known.shots[at];
}

function toggle(): void {
  setLeftOut(shot.value, !leftOut.value.has(shot.value));
}

const ways: Record<string, [number, number]> = {
  ArrowLeft: [-1, 0],
  ArrowRight: [1, 0],
  ArrowUp: [0, 1],
  ArrowDown: [0, -1],
};

/** Does what the key says, if it says anything. Keys with Ctrl, Alt or Meta are left to the browser. */
function steer(event: KeyboardEvent, { dots, chosen }: SphereScene, { shots }: Directions): void {
  if (event.ctrlKey || event.altKey || event.metaKey || shots.length === 0) return;
  const way = ways[event.key];
  const by = { PageUp: -1, PageDown: 1 }[event.key];
  if (way) go(shots, chosen < 0 ? 0 : nextPlace(dots.map(({ place }) => place), chosen, ...way));
  else if (by) go(shots, Math.min(Math.max(chosen + by, 0), shots.length - 1));
  else if (event.key === "Home") go(shots, 0);
  else if ((event.key === "Enter" || event.key === " ") && chosen >= 0) toggle();
  else return;
  event.preventDefault();
}

function go(shots: number[], to: number | undefined): void {
  if (to !== undefined) shot.value = shots[to];
}
