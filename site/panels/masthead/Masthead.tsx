// Name, and the actions on the whole page.

import { useEffect, useRef } from "preact/hooks";
import { acquisition, openDemo, openFiles } from "../../store/acquisition";
import { theme, type Theme } from "../../store/appearance";
import { canSave, loadRecipe, mapNames, saveMap, saveMaps, saveRecipe, type MapName } from "../../store/save";
import { strands } from "../../store/strand";
import { touch, touched } from "../../store/variants";

export function Masthead() {
  return (
    <header class="masthead">
      <div class="name">
        <h1>Torrloom</h1>
        <p>pO₂ maps from the raw data of a pulse EPR imager</p>
        {acquisition.value?.madeUp && (
          <strong class="tag" data-made-up>
            Made-up data
          </strong>
        )}
      </div>
      <Actions />
    </header>
  );
}

function Actions() {
  const strand = touched.value;
  return (
    <div class="actions" role="group" aria-label="Files and settings of the page">
      <FileButton id="open-files" label="Open files" multiple take={openFiles} />
      <button id="use-demo" onClick={() => void openDemo()}>
        Use demo
      </button>
      <VariantPicker />
      <SaveMaps />
      <button id="save-recipe" disabled={!strand} onClick={() => saveRecipe(strand!)}>
        Save recipe
      </button>
      <FileButton
        id="load-recipe"
        label="Load recipe"
        accept=".json,application/json"
        disabled={!strand}
        take={([file]) => void loadRecipe(strand!, file)}
      />
      <label class="theme">
        <span class="unseen">Theme</span>
        <select id="theme" value={theme.value} onChange={(e) => (theme.value = e.currentTarget.value as Theme)}>
          <option value="system">system theme</option>
          <option value="light">light theme</option>
          <option value="dark">dark theme</option>
        </select>
      </label>
    </div>
  );
}

/** Chooses among several variants the one that is saved, loaded into and undone; it follows the one touched last. */
function VariantPicker() {
  if (strands.value.length < 2) return null;
  const pick = (id: number) => touch(strands.value.find((strand) => strand.id === id)!);
  return (
    <label class="variant-picker">
      <span class="unseen">Variant to save or to load into</span>
      <select id="variant" value={touched.value!.id} onChange={(event) => pick(Number(event.currentTarget.value))}>
        {strands.value.map((strand) => (
          <option key={strand.id} value={strand.id}>
            {strand.name.value}
          </option>
        ))}
      </select>
    </label>
  );
}

interface FileButtonProps {
  id: string;
  label: string;
  multiple?: boolean;
  accept?: string;
  disabled?: boolean;
  take: (files: File[]) => void;
}

function FileButton({ id, label, take, disabled, ...input }: FileButtonProps) {
  const picker = useRef<HTMLInputElement>(null);
  const picked = ({ currentTarget }: { currentTarget: HTMLInputElement }) => {
    const files = [...(currentTarget.files ?? [])];
    currentTarget.value = "";
    if (files.length > 0) take(files);
  };
  return (
    <>
      <button id={id} disabled={disabled} onClick={() => picker.current!.click()}>
        {label}
      </button>
      <input {...input} id={`${id}-input`} type="file" ref={picker} hidden aria-label={label} onChange={picked} />
    </>
  );
}

const wordsFor: Record<MapName, string> = {
  pO2: "pO₂ map",
  rate: "rate map",
  amplitude: "amplitude image that is shown",
  mask: "mask",
};

function SaveMaps() {
  const menu = useRef<HTMLDetailsElement>(null);
  const strand = touched.value;
  useClosing(menu);
  return (
    <details class="menu" ref={menu}>
      <summary id="save-maps">Save maps</summary>
      <div class="menu-body">
        <p>NIfTI-1, compressed, in mm</p>
        {mapNames.map((map) => (
          <button
            id={`save-${map}`}
            key={map}
            disabled={!strand || !canSave(strand, map)}
            onClick={() => void saveMap(strand!, map)}
          >
            {wordsFor[map]}
          </button>
        ))}
        <button id="save-all" disabled={!strand} onClick={() => void saveMaps(strand!)}>
          all of them
        </button>
      </div>
    </details>
  );
}

/** Closes an open menu at the Escape key, which gives the focus back, and at a press outside. */
function useClosing(menu: { current: HTMLDetailsElement | null }): void {
  useEffect(() => {
    const press = (event: Event) => {
      if (!menu.current!.contains(event.target as Node)) menu.current!.open = false;
    };
    const key = (event: KeyboardEvent) => {
      if (event.key !== "Escape" || !menu.current!.open) return;
      menu.current!.open = false;
      menu.current!.querySelector("summary")!.focus();
    };
    addEventListener("pointerdown", press);
    addEventListener("keydown", key);
    return () => {
      removeEventListener("pointerdown", press);
      removeEventListener("keydown", key);
    };
  }, []);
}
