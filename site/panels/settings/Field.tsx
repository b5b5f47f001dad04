// One setting: its label, its input, its unit, and what is wrong with it.

import { useEffect, useState } from "preact/hooks";
import { unitText } from "../../draw/number";
import { setValue } from "../../store/edit";
import { listOf, textOfList } from "../../store/list";
import { sameValue, valueAt } from "../../store/recipe";
import type { StageName, Strand } from "../../store/strand";
import type { Setting } from "../../wire.gen";
import { mayBeEmpty } from "./groups";

interface Props {
  setting: Setting;
  strand: Strand;
  explain: (help: string) => void;
}

// A longer label takes a line of its own.
const shortLabel = 22;

export function Field({ setting, strand, explain }: Props) {
  const { path, label, unit, kind } = setting;
  const id = `setting-${strand.id}-${path.replaceAll(".", "-")}`;
  const [unread, setUnread] = useState("");
  const fault = unread || faultAt(strand, path);
  const help = explanationOf(setting);
  const Input = kind === "choice" ? ChoiceInput : kind === "list" ? ListInput : NumberInput;
  return (
    <div
      class={label.length > shortLabel ? "field long" : "field"}
      onPointerEnter={() => explain(help)}
      onFocusIn={() => explain(help)}
    >
      <label for={id}>{label}</label>
      <Input
        id={id}
        data-setting={path}
        aria-describedby={`${id}-help`}
        aria-invalid={fault ? true : undefined}
        setting={setting}
        strand={strand}
        tellUnread={setUnread}
      />
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

interface InputProps {
  setting: Setting;
  strand: Strand;
  id: string;
  "data-setting": string;
  "aria-describedby": string;
  "aria-invalid": true | undefined;
  /** Says why what was typed cannot be read, or "". */
  tellUnread: (why: string) => void;
}

function ChoiceInput({ setting, strand, tellUnread, ...input }: InputProps) {
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

interface Reading {
  /** What the text says, or undefined when it cannot be read. */
  read: (text: string) => unknown;
  show: (value: unknown) => string;
  unreadable: string;
}

interface Draft {
  text: string;
  value: unknown;
}

/** Keeps what is being typed as it is typed; a value that comes from elsewhere, as by undo, takes its place. */
function useDraft({ setting, strand, tellUnread }: InputProps, { read, show, unreadable }: Reading) {
  const { path, stage } = setting;
  const [draft, setDraft] = useState<Draft | null>(null);
  const value = valueAt(strand.recipe.value, path);
  const standing = draft !== null && sameValue(draft.value, value);
  useEffect(() => {
    if (!standing) tellUnread("");
  }, [standing]);
  const onInput = (event: { currentTarget: HTMLInputElement }) => {
    const text = event.currentTarget.value;
    const entered = event.currentTarget.validity.badInput ? undefined : read(text);
    tellUnread(entered === undefined ? unreadable : "");
    setDraft({ text, value: entered ?? value });
    if (entered !== undefined) setValue(strand, path, entered, stage as StageName);
  };
  return { value: standing ? draft.text : show(value), onInput };
}

function NumberInput(props: InputProps) {
  const { setting, strand, tellUnread, ...input } = props;
  const { path, min, max, step } = setting;
  const optional = mayBeEmpty(path);
  const typed = useDraft(props, {
    read: (text) => readNumber(text, optional),
    show: (value) => String(value ?? (optional ? "" : 0)),
    unreadable: "enter a number",
  });
  const limits = min < max ? { min, max } : {};
  const placeholder = optional ? "0" : undefined;
  return <input {...input} {...limits} {...typed} type="number" placeholder={placeholder} step={step || "any"} />;
}

function readNumber(text: string, optional: boolean): number | undefined {
  if (text.trim() === "") return optional ? 0 : undefined;
  const entered = Number(text);
  return Number.isFinite(entered) ? entered : undefined;
}

function ListInput(props: InputProps) {
  const { setting, strand, tellUnread, ...input } = props;
  const typed = useDraft(props, {
    read: (text) => listOf(text) ?? undefined,
    show: (value) => textOfList((value ?? []) as number[]),
    unreadable: "enter whole numbers and ranges, as in 3, 17, 40-44",
  });
  return <input {...input} {...typed} type="text" placeholder="none" spellcheck={false} autocomplete="off" />;
}

/** Returns what the engine said against the setting at a path, or "". */
export function faultAt(strand: Strand, path: string): string {
  const fault = strand.recipeFault.value;
  return fault?.where.split(/\s/).includes(path) ? fault.text : "";
}

/** Returns what a setting does, with its unit and its limits. */
function explanationOf({ help, unit, min, max, kind }: Setting): string {
  const limits = kind === "choice" || kind === "list" || min === max ? "" : ` From ${min} to ${max}${unit && ` ${unitText(unit)}`}.`;
  return help + limits;
}
