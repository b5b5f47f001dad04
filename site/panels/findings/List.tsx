// The findings, worst first. Those that are fine are many, and stay folded away until asked for.

import { useState } from "preact/hooks";
import type { Level } from "../../store/findings";
import { shot } from "../../store/view";
import type { Finding, Report } from "../../wire.gen";
import { marks } from "./words";

export function List({ report }: { report: Report }) {
  const [open, setOpen] = useState(false);
  const fine = report.findings.filter(({ level }) => level === "fine");
  const other = report.findings.filter(({ level }) => level !== "fine");
  return (
    <section aria-labelledby="findings-title">
      <h3 id="findings-title">Findings, worst first</h3>
      {other.length === 0 && <p class="words">No check has anything to say against these data.</p>}
      <Items of={other} />
      {fine.length > 0 && (
        <details class="fold" open={open} onToggle={(event) => setOpen(event.currentTarget.open)}>
          <summary>{fine.length} more that are fine, with their numbers</summary>
          {open && <Items of={fine} />}
        </details>
      )}
    </section>
  );
}

function Items({ of }: { of: Finding[] }) {
  return (
    <ul class="findings">
      {of.map((finding, i) => (
        <Item key={`${finding.check}-${i}`} finding={finding} />
      ))}
    </ul>
  );
}

function Item({ finding }: { finding: Finding }) {
  const { level, check, text, advice, delays } = finding;
  return (
    <li data-finding={check} data-level={level}>
      <p>
        <span class="mark" data-level={level} aria-hidden="true">
          {marks[level as Level]}
        </span>{" "}
        <b>{level}</b> {text}
      </p>
      {advice && <p class="advice">What to do: {advice}.</p>}
      {finding.shots.length > 0 && <Shots of={finding} />}
      {delays.length > 0 && <p class="advice">Delays, numbered from 0: {delays.join(", ")}</p>}
      <details class="rule">
        <summary aria-label={`rule and source: ${check}`}>rule and source</summary>
        <p>Fine is: {finding.rule}.</p>
        {finding.source && <p>Source: {finding.source}.</p>}
      </details>
    </li>
  );
}

/** How many shots are offered one by one; the rest are numbers behind a fold. */
const mostOffered = 16;

function Shots({ of: { check, shots } }: { of: Finding }) {
  return (
    <div class="concerned" role="group" aria-label={`shots concerned: ${check}`} data-shots={shots.join(" ")}>
      <span>Shots:</span>
      {shots.slice(0, mostOffered).map((one) => (
        <button
          key={one}
          type="button"
          aria-pressed={shot.value === one}
          aria-label={`look at shot ${one} (${check})`}
          onClick={() => (shot.value = one)}
        >
          {one}
        </button>
      ))}
      {shots.length > mostOffered && (
        <details class="fold">
          <summary aria-label={`the other shots: ${check}`}>and {shots.length - mostOffered} more</summary>
          <p>{shots.slice(mostOffered).join(", ")}</p>
        </details>
      )}
    </div>
  );
}
