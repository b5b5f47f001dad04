// The check of the open acquisition: a line that always says the verdict, and under it what was found, what to do about
// it, and the shots themselves.

import { acquisition } from "../../store/acquisition";
import { wordsOf } from "../../store/fault";
import { checkOpen, examining, findingsFault, isOlderReport, report, worstOf } from "../../store/findings";
import { Apply } from "./Apply";
import { List } from "./List";
import { Series } from "./Series";
import { ShotMap } from "./ShotMap";
import { ShotCurves } from "./ShotCurves";
import { marks, verdictOf } from "./words";

export function Check() {
  const now = report.value;
  return (
    <details
      class="check"
      data-check={now ? worstOf(now) : ""}
      data-older={isOlderReport.value || examining.value || undefined}
      open={checkOpen.value}
      onToggle={(event) => (checkOpen.value = event.currentTarget.open)}
    >
      <summary>
        Check <Verdict />
      </summary>
      {checkOpen.value && <Body />}
    </details>
  );
}

function Verdict() {
  const now = report.value;
  if (findingsFault.value) return <span class="fault">could not be made: {wordsOf(findingsFault.value)}</span>;
  if (!now) return <span class="verdict">is being made</span>;
  const level = worstOf(now);
  const older = isOlderReport.value || examining.value;
  return (
    <span class="verdict" data-verdict={level}>
      <span class="mark" data-level={level} aria-hidden="true">
        {marks[level]}
      </span>{" "}
      {verdictOf(now)}
      {older && <span class="older"> (older than the settings, being made anew)</span>}
    </span>
  );
}

function Body() {
  const now = report.value;
  if (!now) return <p class="words">The findings come when the first maps are made.</p>;
  return (
    <div class="check-body">
      <div>
        <Apply report={now} />
        <List report={now} />
      </div>
      {acquisition.value?.encoding === "spoke" ? (
        <div class="check-shots">
          <ShotMap report={now} />
          <ShotCurves />
          <Series report={now} />
        </div>
      ) : (
        <NoDirections />
      )}
    </div>
  );
}

function NoDirections() {
  return (
    <p class="words" data-no-directions>
      Single-point data have no spokes. A map of directions, neighbours in direction, projections, and drift seen from shot
      to shot have no meaning for them. The findings beside this text are those that have.
    </p>
  );
}
