// The page: masthead, acquisition, shared view, strands, footer; and its start and its failure to start.

import { useEffect, useState } from "preact/hooks";
import { Acquisition } from "./panels/acquisition/Acquisition";
import { Footer } from "./panels/footer/Footer";
import { Masthead } from "./panels/masthead/Masthead";
import { Notices } from "./panels/masthead/Notices";
import { StrandPanel } from "./panels/strand/Strand";
import { ViewBar } from "./panels/view/ViewBar";
import { acquisition, openFiles } from "./store/acquisition";
import { filesOf } from "./store/drop";
import { redo, undo } from "./store/edit";
import { startFault } from "./store/engine";
import { faultOf, wordsOf } from "./store/fault";
import { openFault } from "./store/opening";
import { strands } from "./store/strand";
import { touched } from "./store/variants";

export function Page() {
  const dropping = useDrop();
  useUndoKeys();
  if (startFault.value) return <NoStart />;
  return (
    <>
      <Masthead />
      <Notices />
      <main>
        {acquisition.value ? (
          <Acquisition />
        ) : (
          <p class="starting" role="status">
            The engine is starting.
          </p>
        )}
        <ViewBar />
        {strands.value.map((strand) => (
          <StrandPanel key={strand.id} strand={strand} />
        ))}
      </main>
      <Footer />
      {dropping && <p class="drop">Drop the raw files of one acquisition, or their folder.</p>}
    </>
  );
}

function NoStart() {
  return (
    <main class="no-start">
      <h1>Torrloom</h1>
      <p class="fault" role="alert" data-fault="start">
        {wordsOf(startFault.value!)}
      </p>
      <Footer />
    </main>
  );
}

/** Opens files dropped anywhere; returns whether some are held over the page. */
function useDrop(): boolean {
  const [dropping, setDropping] = useState(false);
  useEffect(() => {
    const over = (event: DragEvent) => {
      if (!event.dataTransfer?.types.includes("Files")) return;
      event.preventDefault();
      setDropping(true);
    };
    const leave = (event: DragEvent) => !event.relatedTarget && setDropping(false);
    const drop = (event: DragEvent) => {
      event.preventDefault();
      setDropping(false);
      if (event.dataTransfer) void openDropped(event.dataTransfer);
    };
    return listening({ dragover: over, dragleave: leave, drop });
  }, []);
  return dropping;
}

async function openDropped(transfer: DataTransfer): Promise<void> {
  try {
    await openFiles(await filesOf(transfer));
  } catch (error) {
    openFault.value = faultOf(error);
  }
}

function useUndoKeys(): void {
  useEffect(() => {
    const keydown = (event: KeyboardEvent) => {
      const strand = touched.value;
      if (!strand || isText(event.target) || !(event.ctrlKey || event.metaKey) || event.altKey) return;
      const key = event.key.toLowerCase();
      if (key !== "z" && key !== "y") return;
      event.preventDefault();
      (key === "y" || event.shiftKey ? redo : undo)(strand);
    };
    return listening({ keydown });
  }, []);
}

/** Tells whether a place has an undo of its own that a person would miss. */
function isText(target: EventTarget | null): boolean {
  return target instanceof HTMLInputElement && target.matches("[data-name]");
}

type Listeners = { [Name in keyof WindowEventMap]?: (event: WindowEventMap[Name]) => void };

/** Adds listeners to the window; returns what removes them. */
function listening(listeners: Listeners): () => void {
  const all = Object.entries(listeners) as [string, EventListener][];
  for (const [name, listener] of all) addEventListener(name, listener);
  return () => {
    for (const [name, listener] of all) removeEventListener(name, listener);
  };
}
