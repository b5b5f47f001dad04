// The distribution of the last map of a strand, as a histogram and as numbers.

import { histogramChart } from "../../draw/chart";
import type { Quantity } from "../../draw/colour";
import { count, decimalsFor, fixed, percent, plain, seconds, unitText } from "../../draw/number";
import { acquisition } from "../../store/acquisition";
import { stageNames, type Derived, type Strand } from "../../store/strand";
import { windowOf } from "../../store/view";
import type { Summary } from "../../wire.gen";
import { Chart, type Table } from "../chart/Chart";

interface Props {
  strand: Strand;
  /** Leaves away what is not needed to tell one strand from another. */
  brief: boolean;
}

export function Numbers({ strand, brief }: Props) {
  const derived = strand.oxygen.value?.derived;
  if (!derived) return <p class="words">nothing yet</p>;
  const quantity = derived.pO2 ? "pO2" : "rate";
  const summary = derived.pO2 ?? derived.rate;
  const name = derived.pO2 ? "pO₂" : (acquisition.value?.rateName ?? "rate");
  return (
    <div class="numbers">
      {summary.count > 0 && <Histogram summary={summary} quantity={quantity} name={name} />}
      <dl class="figures">
        {figuresOf(summary, derived, brief).map(({ key, label, text }) => (
          <div key={key}>
            <dt>{label}</dt>
            <dd data-number={key}>{text}</dd>
          </div>
        ))}
        {!brief && (
          <div>
            <dt>time of the last run</dt>
            <dd data-number="seconds">{seconds(secondsOf(strand))}</dd>
          </div>
        )}
      </dl>
    </div>
  );
}

function Histogram({ summary, quantity, name }: { summary: Summary; quantity: Quantity; name: string }) {
  const unit = unitText(summary.unit);
  const window = windowOf(quantity);
  const marks = summary.fractions?.map(({ threshold }) => threshold) ?? [];
  return (
    <Chart
      title={`voxels by ${name}`}
      table={() => binTable(summary, unit)}
      summary={`histogram of ${name} in ${unit}, median ${plain(summary.median, 3)}`}
      draw={(width) => histogramChart(summary, { quantity, window, label: labelOf(name, unit, marks), marks, width })}
    />
  );
}

function labelOf(name: string, unit: string, marks: number[]): string {
  return `${name} in ${unit}${marks.length > 0 ? ` (shaded: ≤ ${marks.join(", ")})` : ""}`;
}

function binTable({ edges, counts, below, above }: Summary, unit: string): Table {
  const last = edges.length - 1;
  const rows = counts.map((n, i) => [plain(edges[i], 4), plain(edges[i + 1], 4), String(n)]);
  const outside = [
    ["all below", plain(edges[0], 4), String(below)],
    [plain(edges[last], 4), "all above", String(above)],
  ];
  return { head: [`from, ${unit}`, `to, ${unit}`, "voxels"], rows: [outside[0], ...rows, outside[1]] };
}

interface Figure {
  key: string;
  label: string;
  text: string;
}

/** Returns the numbers in reading order. Their digits follow the median standard error of a voxel. */
function figuresOf(s: Summary, derived: Derived, brief: boolean): Figure[] {
  if (s.count === 0) return [{ key: "voxels", label: "voxels", text: "0: no voxel has an answer" }];
  const unit = unitText(s.unit);
  const decimals = decimalsFor(s.medianSE);
  const say = (value: number) => fixed(value, decimals);
  const [lower, upper] = s.quartiles;
  const all = [
    { key: "median", label: "median", text: `${say(s.median)} ${unit}` },
    { key: "quartiles", label: "quartiles", text: `${say(lower)} to ${say(upper)} ${unit}` },
    { key: "mean", label: "mean ± SD", text: `${say(s.mean)} ± ${say(s.sd)} ${unit}` },
    { key: "medianSE", label: "median standard error", text: `${say(s.medianSE)} ${unit}` },
    ...fractionsOf(s),
    { key: "voxels", label: "voxels", text: count(s.count) },
    { key: "beyond", label: "left, right of the bars", text: `${count(s.below)}, ${count(s.above)}` },
    ...(derived.pO2 ? [{ key: "negative", label: "below zero", text: count(derived.negative) }] : []),
  ];
  const dispensable = ["mean", "beyond", ...(derived.negative === 0 ? ["negative"] : [])];
  return brief ? all.filter(({ key }) => !dispensable.includes(key)) : all;
}

function fractionsOf({ fractions, unit }: Summary): Figure[] {
  return (fractions ?? []).map(({ threshold, share }) => ({
    key: `fraction-${threshold}`,
    label: `at or below ${plain(threshold)} ${unit}`,
    text: percent(share),
  }));
}

function secondsOf(strand: Strand): number {
  const times = stageNames.map((name) => strand.stages[name].value);
  return times.reduce((sum, state) => sum + (state.state === "done" ? state.seconds : 0), 0);
}
