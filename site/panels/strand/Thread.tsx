// The thread: a line through the headings of a strand. Each leg is one stage; it is drawn up to the fraction done.

import { seconds } from "../../draw/number";
import { wordsOf } from "../../store/fault";
import { rerun } from "../../store/run";
import type { StageName, StageState, Strand } from "../../store/strand";
import type { Fault } from "../../wire.gen";

export function Thread({ strand, stages }: { strand: Strand; stages: StageName[] }) {
  return (
    <div class="thread" aria-hidden="true">
      {stages.map((name) => (
        <Leg key={name} name={name} state={strand.stages[name].value} />
      ))}
    </div>
  );
}

function Leg({ name, state }: { name: StageName; state: StageState }) {
  const fraction = state.state === "done" ? 1 : state.state === "working" ? state.fraction : 0;
  return (
    <span class="leg" data-stage={name} data-state={state.state}>
      <span class="leg-drawn" style={{ width: `${100 * fraction}%` }} />
      <span class="node" />
    </span>
  );
}

const working: Record<StageName, string> = {
  plan: "checking",
  measure: "measuring the traces",
  reconstruct: "reconstructing",
  fit: "fitting every voxel",
  derive: "masking and converting",
};

const done: Record<StageName, string> = {
  plan: "settings hold",
  measure: "measured",
  reconstruct: "reconstructed",
  fit: "fitted",
  derive: "derived",
};

/** Says where the stages of one heading are, a fault word for word. */
export function StageWords({ strand, stages }: { strand: Strand; stages: StageName[] }) {
  const current = stages.find((name) => strand.stages[name].value.state !== "done") ?? stages[stages.length - 1];
  const state = strand.stages[current].value;
  if (current === "plan" && state.state === "failed") return <p class="words fault">these settings do not hold</p>;
  if (state.state === "failed") return <Failure strand={strand} stage={current} fault={state.fault} />;
  return <p class="words">{wordsFor(current, state)}</p>;
}

function Failure({ strand, stage, fault }: { strand: Strand; stage: StageName; fault: Fault }) {
  return (
    <div class="words">
      <p class="fault" role="status">
        {wordsOf(fault)}
      </p>
      <button type="button" data-action="retry" onClick={() => rerun(strand, stage)}>
        Try again
      </button>
    </div>
  );
}

function wordsFor(name: StageName, state: StageState): string {
  if (state.state === "working" && state.coarse) return "making a coarse map first";
  if (state.state === "working") return `${working[name]}, ${Math.round(100 * state.fraction)} %`;
  if (state.state !== "done") return "waiting";
  if (name === "plan") return done.plan;
  return state.reused ? `${done[name]} earlier` : `${done[name]} in ${seconds(state.seconds)}`;
}
