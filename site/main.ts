// Entry of the page. For tests, and for whoever looks at it with the browser's tools, it keeps these marks:
//
//   body[data-state]                          starting, ready (an acquisition is open) or failed (no engine)
//   [data-strand="0"]                         a variant, the first being the reference; data-touched: undo acts on it;
//                                             data-folded: its settings are hidden
//   [data-name], [data-difference]            its name, and what sets it apart from the reference
//   [data-strand="0"] [data-stage][data-state] stages plan, measure, reconstruct, fit, derive of a variant, each
//                                             waiting, working, done or failed
//   [data-strand="0"] [data-map]              figures amplitude, rate, pO2; data-older when older than the settings;
//                                             data-coarse while the full image is being made;
//                                             canvas[data-drawn] once there is something to see
//   [data-value], [data-clipped]              value of a map at the cursor, share of its slice beyond the window
//   [data-number]                             median, quartiles, mean, medianSE, fraction-2.5, ..., voxels, negative,
//                                             seconds
//   [data-fate]                               legend entry of one fate, by its value
//   [data-fact]                               name, sequence, delays, shots, ... of the acquisition
//   [data-setting]                            input of a setting by its path; "calibration" is the switch
//   [data-group]                              a part of the form that folds
//   [data-action]                             buttons undo, redo, reset, add, remove, fold of a variant; retry at a
//                                             failed stage
//   [data-removed], #bring-back, #variant     the variant removed last; the one that saving and loading act on
//   [data-fault]                              text of a fault: open, save, start, recipe, or the path of a setting
//   [data-check]                              the check: its worst level; data-older while it lags behind the settings
//   [data-verdict], [data-finding][data-level], [data-shots], #apply-proposed, #take-back, [data-before-after],
//   #check-shot, #toggle-shot, #series, [data-shots-drawn], [data-left-out], [data-shot-view], [data-off-image]
//                                             within the check
//   [data-made-up], [data-no-calibration], [data-opening], [data-warnings], [data-build]
//   #open-files-input, #load-recipe-input     file inputs; #use-demo, #save-recipe, #save-maps, #save-pO2, #save-rate,
//                                             #save-amplitude, #save-mask, #save-all; #theme
//   #readout, #slice, #delay, #shot, input[name=plane], #window-0-pO2-low, ...  shared view

import { effect } from "@preact/signals";
import { h, render } from "preact";
import { Page } from "./page";
import { acquisition, openDemo } from "./store/acquisition";
import { followTheme } from "./store/appearance";
import { start, startFault } from "./store/engine";
import { followFindings } from "./store/findings";
import { followShots } from "./store/shotview";
import { followTraces } from "./store/traces";
import "./style.css";

function followState(): void {
  effect(() => {
    document.body.dataset.state = startFault.value ? "failed" : acquisition.value ? "ready" : "starting";
  });
}

async function begin(): Promise<void> {
  followTheme();
  followState();
  const place = document.getElementById("page")!;
  place.replaceChildren();
  render(h(Page, null), place);
  // The page is seen before the engine's program is unpacked.
  await new Promise((go) => setTimeout(go));
  if (!(await start())) return;
  followTraces();
  followFindings();
  followShots();
  await openDemo();
}

void begin();
