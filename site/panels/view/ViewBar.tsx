// What all strands share: plane, slice, frame of the amplitude image, and the values at the cursor in words.

import { axesOf, axisNames, isFlat, planes, voxelAt, type Grid } from "../../draw/grid";
import { fixed, plain } from "../../draw/number";
import { strands, type Strand } from "../../store/strand";
import { cursorMM, frameIndex, frameUS, moveSlice, plane } from "../../store/view";
import { readoutOf } from "./readout";

export function ViewBar() {
  const strand = strands.value[0];
  const grid = strand?.images.value?.grid;
  if (!grid) return null;
  return (
    <section class="view-bar" aria-label="Shared view">
      <PlanePicker flat={isFlat(grid)} />
      <SlicePicker grid={grid} />
      <FramePicker strand={strand} />
      <p class="readout" id="readout" role="status">
        {readoutOf(strand).map((part, i) => (
          <span key={i}>{part} </span>
        ))}
      </p>
    </section>
  );
}

function PlanePicker({ flat }: { flat: boolean }) {
  return (
    <fieldset class="planes">
      <legend class="unseen">plane</legend>
      {planes.map((name) => (
        <label key={name}>
          <input
            type="radio"
            name="plane"
            value={name}
            checked={plane.value === name}
            disabled={flat && name !== "xy"}
            onChange={() => (plane.value = name)}
          />
          <span>
            {name[0]}–{name[1]}
          </span>
        </label>
      ))}
    </fieldset>
  );
}

function SlicePicker({ grid }: { grid: Grid }) {
  const { w } = axesOf(plane.value);
  const at = voxelAt(grid, cursorMM.value)[w];
  const last = grid.n[w] - 1;
  const mm = fixed(grid.originMM[w] + at * grid.voxelMM[w], 1);
  return (
    <label class="slice">
      <span>slice</span>
      <input
        id="slice"
        type="range"
        min={0}
        max={last}
        step={1}
        value={at}
        disabled={last === 0}
        aria-valuetext={`${axisNames[w]} ${mm} mm, slice ${at} of 0 to ${last}`}
        onInput={(event) => moveSlice(grid, Number(event.currentTarget.value) - at)}
      />
      <output data-slice={at}>
        {axisNames[w]} = {mm} mm
      </output>
    </label>
  );
}

function FramePicker({ strand }: { strand: Strand }) {
  const { kind, timeUS } = strand.plan.value?.frames ?? { kind: "delay", timeUS: [] };
  return (
    <label class="delay">
      <span>amplitude at {kind}</span>
      <select
        id="frame"
        value={frameIndex(timeUS)}
        onChange={(event) => (frameUS.value = timeUS[Number(event.currentTarget.value)])}
      >
        {timeUS.map((us, f) => (
          <option value={f} key={f}>
            {plain(us, 4)} µs
          </option>
        ))}
      </select>
    </label>
  );
}
