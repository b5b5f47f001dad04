// The numbers behind the map of shots.

import { significant, unitText } from "../../draw/number";
import { leftOut } from "../../store/findings";
import type { Directions } from "../../store/shotview";
import type { Report } from "../../wire.gen";
import { Numbers, type Table } from "../chart/Chart";

export function ShotTable({ report, known }: { report: Report; known: Directions }) {
  return (
    <div class="chart">
      <Numbers title="shots by direction" table={() => tableOf(report, known)} />
    </div>
  );
}

function tableOf({ shots, series }: Report, { shots: all, gradient }: Directions): Table {
  const places = new Map(shots.map((s, i) => [s, i]));
  const names = series.map(({ label, unit }) => (unit ? `${label}, ${unitText(unit)}` : label));
  const rows = all.map((s) => {
    const at = places.get(s);
    const numbers = series.map(({ values }) => (at === undefined ? "" : significant(values[at])));
    const use = leftOut.value.has(s) ? "left out" : at === undefined ? "not used" : "in use";
    return [String(s), ...gradient[s].map((g) => significant(g)), use, ...numbers];
  });
  return { head: ["shot", "gradient x, mT/m", "y", "z", "use", ...names], rows };
}
