// One setting: its label, its input, its unit, and what is wrong with it.

import { useEffect, useState } from "preact/hooks";
import { unitText } from "../../draw/number";
import { setValue } from "../../store/edit";
import { valueAt } from "../../store/recipe";
import type { StageName, Strand } from "../../store/strand";
import type { Setting } from "../../wire.gen";

interface Props {
  setting: Setting;
  strand: Strand;
  explain: (help: string) => void;
}

export function Field({ setting, strand, explain }: Props) {
  const { path, label, unit } = setting;
  const id = `setting-${strand.id}-${path.replaceAll(".", "-")}`;
  const [unreadable, setUnreadable] = useState(false);
  const fault = unreadable ? "enter a number" : faultAt(strand, path);
  const help = explanationOf(setting);
  const input = {
    id,
    "data-setting": path,
    "aria-describedby": `${id}-help`,
    "aria-invalid": fault ? true : undefined,
  };
  return (
    <div class="field" onPointerEnter={() => explain(help)} onFocusIn={() => explain(help)}>
      <label for={id}>{label}</label>
      {setting.kind === "choice" ? (
        <ChoiceInput {...input} setting={setting} strand={strand} />
      ) : (
        <NumberInput {...input} setting={setting} strand={strand} tellUnreadable={setUnreadable} />
      )}
      <span class="unit">{unitText(unit)}</span>
      <span class="unseen" id={`${id}-help`}>
        {fault ? `${fault}. ${help}` : help}
      </span>
      {fault && (
        <p class="fault" data-fault={path} aria-hidden="true">
          {fault}
        </p>
      )}
    </div>
  );
}

type InputProps = { setting: Setting; strand: Strand; id: string };

type NumberInputProps = InputProps & { tellUnreadable: (unreadable: boolean) => void };

function ChoiceInput({ setting, strand, ...input }: InputProps) {
  const { path, choices, stage } = setting;
  const value = String(valueAt(strand.recipe.value, path) ?? "");
  const pick = (picked: string) => setValue(strand, path, picked, stage as StageName);
  return (
    <select {...input} value={value} onChange={(event) => pick(event.currentTarget.value)}>
      {choices.map((choice) => (
        <option key={choice.value} value={choice.value} title={choice.help}>
          {choice.label}
        </option>
      ))}
    </select>
  );
}

interface Draft {
  text: string;
  value: unknown;
}

/** Shows what is being typed as it is typed; a value that comes from elsewhere, as by undo, takes its place. */
function NumberInput({ setting, strand, tellUnreadable, ...input }: NumberInputProps) {
  const { path, min, max, step, stage } = setting;
  const [draft, setDraft] = useState<Draft | null>(null);
  const value = valueAt(strand.recipe.value, path);
  const standing = draft !== null && draft.value === value;
  useEffect(() => {
    if (!standing) tellUnreadable(false);
  }, [standing]);
  const read = (text: string) => {
    const entered = Number(text);
    const readable = text.trim() !== "" && Number.isFinite(entered);
    tellUnreadable(!readable);
    setDraft({ text, value: readable ? entered : value });
    if (readable) setValue(strand, path, entered, stage as StageName);
  };
  const limits = min < max ? { min, max } : {};
  return (
    <input
      {...input}
      {...limits}
      type="number"
      value={standing ? draft.text : String(value ?? 0)}
      step={step || "any"}
      onInput={(event) => read(event.currentTarget.value)}
    />
  );
}

/** Returns what the engine said against the setting at a path, or "". */
export function faultAt(strand: Strand, path: string): string {
  const fault = strand.recipeFault.value;
  return fault?.where.split(/\s/).includes(path) ? fault.text : "";
}

/** Returns what a setting does, with its unit and its limits. */
function explanationOf({ help, unit, min, max, kind }: Setting): string {
  const limits = kind === "choice" || min === max ? "" : ` From ${min} to ${max}${unit && ` ${unitText(unit)}`}.`;
  return help + limits;
}
