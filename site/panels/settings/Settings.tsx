// The form of a recipe, drawn from the engine's catalogue. A faulty entry shows the engine's words at its field; the
// last good result stays on the screen.

import { useState } from "preact/hooks";
import { redo, resetToDefaults, setCalibrated, undo } from "../../store/edit";
import { hello } from "../../store/engine";
import { wordsOf } from "../../store/fault";
import { textOf } from "../../store/recipe";
import type { Strand } from "../../store/strand";
import type { Setting } from "../../wire.gen";
import { Field, faultAt } from "./Field";

const calibrationBranch = "calibration.";

export function Settings({ strand }: { strand: Strand }) {
  const [help, setHelp] = useState("");
  const catalogue = hello.value?.catalogue ?? [];
  return (
    <form class="settings" onSubmit={(event) => event.preventDefault()}>
      <Steps strand={strand} />
      <StrayFault strand={strand} catalogue={catalogue} />
      {groupsOf(catalogue).map(({ name, settings }) => (
        <Group key={name} name={name} settings={settings} strand={strand} explain={setHelp} />
      ))}
      <p class="help" aria-hidden="true">
        {help || "Point at a setting, or move to it, to read what it does."}
      </p>
    </form>
  );
}

function Steps({ strand }: { strand: Strand }) {
  const { canUndo, canRedo } = strand.history;
  const changed = textOf(strand.recipe.value) !== textOf(strand.defaults);
  return (
    <p class="steps">
      <button type="button" data-action="undo" disabled={!canUndo.value} onClick={() => undo(strand)}>
        Undo
      </button>
      <button type="button" data-action="redo" disabled={!canRedo.value} onClick={() => redo(strand)}>
        Redo
      </button>
      <button type="button" data-action="reset" disabled={!changed} onClick={() => resetToDefaults(strand)}>
        Defaults
      </button>
    </p>
  );
}

/** A fault of the recipe that names no field of the form. */
function StrayFault({ strand, catalogue }: { strand: Strand; catalogue: Setting[] }) {
  const fault = strand.recipeFault.value;
  if (!fault || catalogue.some(({ path }) => faultAt(strand, path))) return null;
  return (
    <p class="fault" data-fault="recipe" role="status">
      {wordsOf(fault)}
    </p>
  );
}

interface GroupProps {
  name: string;
  settings: Setting[];
  strand: Strand;
  explain: (help: string) => void;
}

function Group({ name, settings, strand, explain }: GroupProps) {
  const optional = settings.every(({ path }) => path.startsWith(calibrationBranch));
  const calibrated = strand.recipe.value.calibration !== undefined;
  return (
    <fieldset class="group">
      <legend>{name}</legend>
      {optional && <CalibrationSwitch strand={strand} on={calibrated} />}
      {(calibrated || !optional) &&
        settings.map((setting) => <Field key={setting.path} setting={setting} strand={strand} explain={explain} />)}
    </fieldset>
  );
}

function CalibrationSwitch({ strand, on }: { strand: Strand; on: boolean }) {
  return (
    <label class="switch">
      <input
        type="checkbox"
        data-setting="calibration"
        checked={on}
        onChange={(event) => setCalibrated(strand, event.currentTarget.checked)}
      />
      convert to pO₂
    </label>
  );
}

function groupsOf(catalogue: Setting[]): { name: string; settings: Setting[] }[] {
  const groups: { name: string; settings: Setting[] }[] = [];
  for (const setting of catalogue) {
    const known = groups.find(({ name }) => name === setting.group);
    if (known) known.settings.push(setting);
    else groups.push({ name: setting.group, settings: [setting] });
  }
  return groups;
}
