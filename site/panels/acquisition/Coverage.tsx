// Of single-point data: which sample times hold the object and what they resolve, with the chosen ones shaded.

import { coverageChart } from "../../draw/coverageChart";
import { plain, significant } from "../../draw/number";
import { touched } from "../../store/variants";
import type { Coverage, Opened, SampleTime } from "../../wire.gen";
import { Chart, type Table } from "../chart/Chart";
import { coveringOf } from "./facts";

export function CoverageChart({ opened, coverage }: { opened: Opened; coverage: Coverage }) {
  const { firstUS, lastUS } = touched.value?.recipe.value.singlePoint ?? opened.recipe.singlePoint;
  const times = coverage.times.filter((time) => time.usable);
  if (times.length === 0) return null;
  const { extentMM } = opened;
  const range = `${plain(firstUS, 4)} to ${plain(lastUS, 4)} µs`;
  return (
    <Chart
      title="field of view, resolution (broken) in mm"
      summary={`${coveringOf(times, extentMM)} hold the object; those from ${range} are chosen`}
      draw={(width) => coverageChart(times, { extentMM, fromUS: firstUS, toUS: lastUS, width })}
      table={() => coverageTable(times, extentMM)}
    />
  );
}

function coverageTable(times: SampleTime[], extentMM: number): Table {
  return {
    head: ["sample time in µs", "field of view in mm", "resolution in mm", "holds the object"],
    rows: times.map(({ timeUS, fieldOfViewMM, resolutionMM }) => [
      plain(timeUS, 5),
      significant(fieldOfViewMM, 4),
      significant(resolutionMM, 3),
      fieldOfViewMM >= extentMM ? "yes" : "no",
    ]),
  };
}
