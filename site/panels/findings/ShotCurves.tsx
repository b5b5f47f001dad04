// The chosen shot beside its neighbours in direction, and beside what the image of the first variant would have given.

import { shotProjectionChart, shotTraceChart } from "../../draw/shotChart";
import { percent, plain } from "../../draw/number";
import { wordsOf } from "../../store/fault";
import { shotFault, shotView } from "../../store/shotview";
import type { ShotView } from "../../wire.gen";
import { tableOf } from "../acquisition/Acquisition";
import { Chart } from "../chart/Chart";

export function ShotCurves() {
  const view = shotView.value;
  return (
    <section class="shot-curves" aria-labelledby="shot-curves-title" data-shot-view={view?.shot}>
      <h3 id="shot-curves-title">The chosen shot{view && `, ${view.shot}, at the reference delay`}</h3>
      {shotFault.value && <p class="fault">{wordsOf(shotFault.value)}</p>}
      {view && <Words view={view} />}
      {view && <Curves view={view} />}
    </section>
  );
}

function Words({ view }: { view: ShotView }) {
  if (view.positionMM.length === 0) {
    return <p class="words">A shot without gradient has no direction: no projection and no neighbours.</p>;
  }
  const near = view.neighbours.map((n) => `${n.shot} at ${plain(n.angleDeg, 2)}°${n.opposite ? ", mirrored" : ""}`);
  return (
    <p class="words" data-shot-off>
      Bold: the shot. Thin: its neighbours, {near.join("; ")}. It differs from their mean by{" "}
      <b>{percent(view.offNeighbours)}</b> of its size
      {view.fromImage.length > 0 && (
        <>
          , and from the projection of the image (broken) by <b data-off-image>{percent(view.offImage)}</b>
        </>
      )}
      .
    </p>
  );
}

function Curves({ view }: { view: ShotView }) {
  const { timeNS, positionMM, neighbours } = view;
  const heads = neighbours.map((n) => `shot ${n.shot}`);
  return (
    <div class="charts">
      {positionMM.length > 0 && (
        <Chart
          title="projection beside neighbours and image"
          draw={(width) => shotProjectionChart(view, width)}
          summary={`projection of shot ${view.shot}, of ${neighbours.length} neighbours and of the image`}
          table={() => projectionTable(view, heads)}
        />
      )}
      {timeNS.length > 0 && (
        <Chart
          title="trace beside neighbours, real part"
          draw={(width) => shotTraceChart(view, width)}
          summary={`real part of the trace of shot ${view.shot} and of ${neighbours.length} neighbours`}
          table={() => tableOf(["time in ns", `shot ${view.shot}`, ...heads], [timeNS, view.real, ...neighbours.map((n) => n.real)])}
        />
      )}
    </div>
  );
}

function projectionTable({ shot, positionMM, projection, neighbours, fromImage }: ShotView, heads: string[]) {
  const image = fromImage.length > 0 ? [fromImage] : [];
  const head = ["position in mm", `shot ${shot}`, ...heads, ...image.map(() => "of the image")];
  return tableOf(head, [positionMM, projection, ...neighbours.map((n) => n.projection), ...image]);
}
