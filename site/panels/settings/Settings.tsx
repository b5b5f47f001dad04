// The form of a recipe, drawn from the engine's catalogue: the settings that the chosen method uses, in groups that
// fold. A faulty entry shows the engine's words at its field; the last good result stays on the screen.

import type { ComponentChildren } from "preact";
import { useState } from "preact/hooks";
import { changedSettings, isForMethod, wordsFor } from "../../store/difference";
import { redo, resetToDefaults, setCalibrated, undo } from "../../store/edit";
import { hello } from "../../store/engine";
import { wordsOf } from "../../store/fault";
import { textOf } from "../../store/recipe";
import type { Strand } from "../../store/strand";
import type { Setting } from "../../wire.gen";
import { Field, faultAt } from "./Field";
import { groupsOf, isAside, openGroups, type SettingGroup } from "./groups";

export function Settings({ strand }: { strand: Strand }) {
  const [help, setHelp] = useState("");
  const { method } = strand.recipe.value.reconstruction;
  const catalogue = (hello.value?.catalogue ?? []).filter((setting) => isForMethod(setting, method));
  return (
    <form class="settings" onSubmit={(event) => event.preventDefault()}>
      <Steps strand={strand} />
      <StrayFault strand={strand} catalogue={catalogue} />
      {groupsOf(catalogue).map((group) => (
        <Group key={group.name} group={group} strand={strand} explain={setHelp} />
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
  group: SettingGroup;
  strand: Strand;
  explain: (help: string) => void;
}

function Group({ group, strand, explain }: GroupProps) {
  const { name, settings, isCalibration } = group;
  const calibrated = strand.recipe.value.calibration !== undefined;
  const shown = isCalibration && !calibrated ? [] : settings;
  const rows = (some: Setting[]) =>
    some.map((setting) => <Field key={setting.path} setting={setting} strand={strand} explain={explain} />);
  const aside = shown.filter(({ path }) => isAside(path));
  return (
    <Fold name={name} settings={shown} strand={strand} starts={openGroups.includes(name)}>
      {isCalibration && <CalibrationSwitch strand={strand} on={calibrated} />}
      {rows(shown.filter(({ path }) => !isAside(path)))}
      {aside.length > 0 && (
        <Fold name="Errors and corrections" settings={aside} strand={strand} starts={false}>
          {rows(aside)}
        </Fold>
      )}
    </Fold>
  );
}

interface FoldProps {
  name: string;
  settings: Setting[];
  strand: Strand;
  starts: boolean;
  children: ComponentChildren;
}

/** A part of the form that folds to one line. It unfolds by itself when something in it is faulty. */
function Fold({ name, settings, strand, starts, children }: FoldProps) {
  const [open, setOpen] = useState(starts);
  const faulty = settings.some(({ path }) => faultAt(strand, path) !== "");
  const isOpen = open || faulty;
  return (
    <details
      class="group"
      data-group={name}
      open={isOpen}
      onToggle={(event) => event.currentTarget.open !== isOpen && setOpen(event.currentTarget.open)}
    >
      <summary>
        <b>{name}</b> {!isOpen && <Departure settings={settings} strand={strand} />}
      </summary>
      <div role="group" aria-label={name}>
        {children}
      </div>
    </details>
  );
}

/** Says in one line what departs from the defaults. */
function Departure({ settings, strand }: Pick<FoldProps, "settings" | "strand">) {
  const recipe = strand.recipe.value;
  const phrases = changedSettings(settings, recipe, strand.defaults).map((setting) => wordsFor(setting, recipe));
  const words = phrases.join(", ") || "as default";
  return (
    <span class={phrases.length > 0 ? "departure" : "departure none"} title={words}>
      {words}
    </span>
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
