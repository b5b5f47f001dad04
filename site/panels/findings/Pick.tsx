// The chosen shot by its number, whether it is used, and the number that colours the map.

import { acquisition } from "../../store/acquisition";
import { leftOut, setLeftOut } from "../../store/findings";
import { directions } from "../../store/shotview";
import { shot } from "../../store/view";
import type { Report } from "../../wire.gen";
import { seriesName } from "./choice";

export function Pick({ report }: { report: Report }) {
  const out = leftOut.value.has(shot.value);
  const usable = out || (directions.value?.shots.includes(shot.value) ?? false);
  return (
    <p class="pick">
      <ShotNumber />
      <button type="button" id="toggle-shot" disabled={!usable} onClick={() => setLeftOut(shot.value, !out)}>
        {out ? "take back" : "leave out"}
      </button>
      <label>
        colour by{" "}
        <select id="series" value={seriesName.value} onChange={(e) => (seriesName.value = e.currentTarget.value)}>
          {report.series.map(({ name, label }) => (
            <option key={name} value={name}>
              {label}
            </option>
          ))}
        </select>
      </label>
      <span data-left-out={[...leftOut.value].join(" ")}>{leftOut.value.size} left out</span>
    </p>
  );
}

function ShotNumber() {
  const last = (acquisition.value?.shots ?? 1) - 1;
  const pick = (text: string) => {
    const picked = Math.round(Number(text));
    if (text.trim() !== "" && Number.isFinite(picked)) shot.value = Math.min(Math.max(picked, 0), last);
  };
  return (
    <label>
      shot{" "}
      <input
        id="check-shot"
        type="number"
        min={0}
        max={last}
        step={1}
        value={shot.value}
        onInput={(event) => pick(event.currentTarget.value)}
      />
    </label>
  );
}
