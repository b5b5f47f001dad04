// The strip of the open acquisition: what it is, what it allows, and the curves of one shot.

import { delayChart, projectionChart, traceChart } from "../../draw/chart";
import { significant } from "../../draw/number";
import { acquisition } from "../../store/acquisition";
import { wordsOf } from "../../store/fault";
import { traces, tracesFault } from "../../store/traces";
import { frameIndex, shot } from "../../store/view";
import type { Input, Opened, Traces } from "../../wire.gen";
import { Chart, type Table } from "../chart/Chart";
import { Check } from "../findings/Check";
import { CoverageChart } from "./Coverage";
import { factsOf, sizeOf } from "./facts";

export function Acquisition() {
  const opened = acquisition.value;
  if (!opened) return null;
  return (
    <section class="acquisition" aria-labelledby="acquisition-title">
      <h2 id="acquisition-title">
        Acquisition{" "}
        <span class="given-name" data-fact="name">
          {opened.name}
        </span>
      </h2>
      <div class="acquisition-body">
        <div>
          <Facts opened={opened} />
          <Inputs inputs={opened.inputs} />
          <Warnings of={opened.warnings} />
        </div>
        <Curves opened={opened} />
      </div>
      <Check />
    </section>
  );
}

function Facts({ opened }: { opened: Opened }) {
  return (
    <dl class="facts">
      {factsOf(opened).map(({ key, label, text }) => (
        <div key={key}>
          <dt>{label}</dt>
          <dd data-fact={key}>{text}</dd>
        </div>
      ))}
    </dl>
  );
}

function Inputs({ inputs }: { inputs: Input[] }) {
  if (inputs.length === 0) return null;
  return (
    <ul class="inputs">
      {inputs.map(({ name, bytes, sha256 }) => (
        <li key={name}>
          {name}, {sizeOf(bytes)},{" "}
          <details class="digest">
            <summary>SHA-256 {sha256.slice(0, 12)}…</summary>
            <code>{sha256}</code>
          </details>
        </li>
      ))}
    </ul>
  );
}

export function Warnings({ of }: { of: string[] }) {
  if (of.length === 0) return null;
  return (
    <ul class="warnings" data-warnings>
      {of.map((text) => (
        <li key={text}>{text}</li>
      ))}
    </ul>
  );
}

function Curves({ opened }: { opened: Opened }) {
  const curves = traces.value;
  return (
    <div class="curves">
      <ShotPicker shots={opened.shots} gradient={curves?.gradientMTPerM} />
      {tracesFault.value && <p class="fault">{wordsOf(tracesFault.value)}</p>}
      {curves && <Charts opened={opened} curves={curves} />}
    </div>
  );
}

function ShotPicker({ shots, gradient }: { shots: number; gradient?: number[] }) {
  const pick = (text: string) => {
    const picked = Math.round(Number(text));
    if (text.trim() !== "" && Number.isFinite(picked)) shot.value = Math.min(Math.max(picked, 0), shots - 1);
  };
  return (
    <p class="shot">
      <label>
        shot{" "}
        <input
          id="shot"
          type="number"
          min={0}
          max={shots - 1}
          step={1}
          value={shot.value}
          onInput={(event) => pick(event.currentTarget.value)}
        />
      </label>{" "}
      of {shots}, numbered from 0{gradient && <Gradient of={gradient} />}
    </p>
  );
}

function Gradient({ of }: { of: number[] }) {
  return <span>; gradient ({of.map((g) => significant(g, 3)).join(", ")}) mT/m</span>;
}

/** Single-point data have no projections and no echo; what they have instead is a coverage. */
function Charts({ opened, curves }: { opened: Opened; curves: Traces }) {
  const { timeNS, projection, delayUS, echoHeight } = curves;
  return (
    <div class="charts">
      {timeNS.length > 0 && (
        <Chart
          title="trace: real, imaginary (broken)"
          draw={(width) => traceChart(curves, width)}
          summary={`phased trace of shot ${shot.value} over ${timeNS.length} samples`}
          table={() => traceTable(curves)}
        />
      )}
      {opened.coverage && <CoverageChart opened={opened} coverage={opened.coverage} />}
      {projection.length > 0 && (
        <Chart
          title="projection"
          draw={(width) => projectionChart(curves, width)}
          summary={`projection of shot ${shot.value} over ${projection.length} positions`}
          table={() => projectionTable(curves)}
        />
      )}
      {echoHeight.length > 0 && (
        <Chart
          title="whole signal over the delays"
          draw={(width) => delayChart(curves, frameIndex(delayUS), width)}
          summary={`mean echo height at ${delayUS.length} delays`}
          table={() => delayTable(curves)}
        />
      )}
    </div>
  );
}

function traceTable({ timeNS, real, imag }: Traces): Table {
  return tableOf(["time in ns", "real", "imaginary"], [timeNS, real, imag]);
}

function projectionTable({ positionMM, projection }: Traces): Table {
  return tableOf(["position in mm", "projection"], [positionMM, projection]);
}

function delayTable({ delayUS, echoHeight }: Traces): Table {
  return tableOf(["delay in µs", "mean echo height"], [delayUS, echoHeight]);
}

/** Returns a table whose columns are the given lists. */
export function tableOf(head: string[], columns: number[][]): Table {
  return { head, rows: columns[0].map((_, i) => columns.map((column) => significant(column[i], 4))) };
}
