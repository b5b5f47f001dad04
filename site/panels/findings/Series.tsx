// A number of every shot over the order of the shots, where drift shows, and the whole signal over the delays.

import { unitText } from "../../draw/number";
import { curveChart, seriesChart } from "../../draw/shotChart";
import { shot } from "../../store/view";
import type { Report } from "../../wire.gen";
import { tableOf } from "../acquisition/Acquisition";
import { Chart } from "../chart/Chart";
import { seriesName } from "./choice";

export function Series({ report }: { report: Report }) {
  const { shots, series, delayUS, curve } = report;
  const shown = series.find(({ name }) => name === seriesName.value) ?? series[0];
  const unit = shown?.unit ? ` in ${unitText(shown.unit)}` : "";
  return (
    <section class="shot-series" aria-labelledby="shot-series-title">
      <h3 id="shot-series-title">Over the order of the shots, and over the delays</h3>
      <div class="charts">
        {shown && (
          <Chart
            title={`${shown.label}${unit}`}
            draw={(width) => seriesChart(shots, shown, shot.value, width)}
            summary={`${shown.label} of ${shots.length} shots in the order of acquisition`}
            table={() => tableOf(["shot", `${shown.label}${unit}`], [shots, shown.values])}
          />
        )}
        {curve.length > 0 && (
          <Chart
            title="signal of the whole object"
            draw={(width) => curveChart(delayUS, curve, width)}
            summary={`signal of the whole object at ${curve.length} delays`}
            table={() => tableOf(["delay in µs", "signal"], [delayUS, curve])}
          />
        )}
      </div>
    </section>
  );
}
