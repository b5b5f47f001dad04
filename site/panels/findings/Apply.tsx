// What the findings propose to set, the button that takes it over, and how the maps and the findings stood before and stand
// after.

import { decimalsFor, fixed, unitText } from "../../draw/number";
import { hello } from "../../store/engine";
import {
  applied,
  applyProposed,
  countsOf,
  isOlderReport,
  levels,
  proposedChanges,
  standing,
  takeBack,
  worstOf,
  type Standing,
} from "../../store/findings";
import { strands } from "../../store/strand";
import type { Report } from "../../wire.gen";
import { changeOf } from "./words";

export function Apply({ report }: { report: Report }) {
  const conditioning = strands.value[0]?.recipe.value.conditioning;
  if (!conditioning) return null;
  const changes = Object.entries(proposedChanges(report, conditioning));
  const catalogue = hello.value?.catalogue ?? [];
  const idle = changes.length === 0 || isOlderReport.value;
  return (
    <section class="apply" aria-labelledby="apply-title">
      <h3 id="apply-title">Proposed conditioning</h3>
      {idle ? (
        <p class="words">{isOlderReport.value ? "Waiting for the new findings." : "Nothing to change."}</p>
      ) : (
        <ul class="changes">
          {changes.map(([name, value]) => (
            <li key={name}>{changeOf(name, value, catalogue)}</li>
          ))}
        </ul>
      )}
      <p class="apply-steps">
        <button type="button" id="apply-proposed" disabled={idle} onClick={applyProposed}>
          Apply what is proposed
        </button>
        <button type="button" id="take-back" disabled={!applied.value} onClick={takeBack}>
          Take it back
        </button>
      </p>
      <p class="caution">Goes into every variant, and can be undone in each.</p>
      {applied.value?.before && <BeforeAfter before={applied.value.before} after={standing()} />}
    </section>
  );
}

function BeforeAfter({ before, after }: { before: Standing; after: Standing | null }) {
  return (
    <table class="before-after" data-before-after={after ? "done" : "working"}>
      <caption>Before and after what was applied</caption>
      <thead>
        <tr>
          <td />
          <th scope="col">before</th>
          <th scope="col">after</th>
        </tr>
      </thead>
      <tbody>
        <tr>
          <th scope="row">
            median {before.quantity} in {unitText(before.unit)}
          </th>
          <td>{medianText(before)}</td>
          <td>{after ? medianText(after) : "…"}</td>
        </tr>
        <tr>
          <th scope="row">the median was off by</th>
          <td colSpan={2}>{after ? offText(before, after) : "…"}</td>
        </tr>
        <tr>
          <th scope="row">worst finding</th>
          <td>{worstOf(before.report)}</td>
          <td>{after ? worstOf(after.report) : "…"}</td>
        </tr>
        <tr>
          <th scope="row">stop, doubt, fine</th>
          <td>{countText(before.report)}</td>
          <td>{after ? countText(after.report) : "…"}</td>
        </tr>
      </tbody>
    </table>
  );
}

function medianText({ median, medianSE }: Standing): string {
  return median === null ? "no answer" : fixed(median, decimalsFor(medianSE / 10));
}

function offText(before: Standing, after: Standing): string {
  if (before.median === null || after.median === null || before.quantity !== after.quantity) return "not comparable";
  return `${fixed(before.median - after.median, decimalsFor(after.medianSE / 10))} ${unitText(after.unit)}`;
}

function countText(report: Report): string {
  const counts = countsOf(report);
  return levels.map((level) => counts[level]).join(", ");
}
