// What opening, saving or loading has to say. It stays in view wherever the page is scrolled.

import { acquisition } from "../../store/acquisition";
import { wordsOf } from "../../store/fault";
import { opening, openFault } from "../../store/opening";
import { saveFault } from "../../store/save";
import { bringBack, removed } from "../../store/variants";

export function Notices() {
  return (
    <div class="notices" role="status">
      {opening.value && (
        <p class="notice" data-opening>
          Opening {opening.value} …
        </p>
      )}
      {removed.value && (
        <p class="notice" data-removed>
          {removed.value.strand.name.value} was removed.
          <button id="bring-back" onClick={bringBack}>
            Bring it back
          </button>
          <button onClick={() => (removed.value = null)}>Dismiss</button>
        </p>
      )}
      {openFault.value && (
        <p class="notice fault" data-fault="open">
          {wordsOf(openFault.value)} {acquisition.value && <span>The acquisition that was open stays open.</span>}{" "}
          <button onClick={() => (openFault.value = null)}>Dismiss</button>
        </p>
      )}
      {saveFault.value && (
        <p class="notice fault" data-fault="save">
          {wordsOf(saveFault.value)} <button onClick={() => (saveFault.value = null)}>Dismiss</button>
        </p>
      )}
    </div>
  );
}
