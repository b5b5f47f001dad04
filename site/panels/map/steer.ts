// The keys that work on a focused map.

import { axesOf, type Grid } from "../../draw/grid";
import { cursorMM, moveCursor, moveFrame, moveSlice, plane } from "../../store/view";

type Move = (grid: Grid) => void;

const moves: Record<string, Move> = {
  ArrowLeft: (grid) => moveCursor(grid, axesOf(plane.value).u, -1),
  ArrowRight: (grid) => moveCursor(grid, axesOf(plane.value).u, 1),
  ArrowDown: (grid) => moveCursor(grid, axesOf(plane.value).v, -1),
  ArrowUp: (grid) => moveCursor(grid, axesOf(plane.value).v, 1),
  PageUp: (grid) => moveSlice(grid, 1),
  PageDown: (grid) => moveSlice(grid, -1),
  ".": (grid) => moveSlice(grid, 1),
  ",": (grid) => moveSlice(grid, -1),
  "]": () => moveFrame(1),
  "[": () => moveFrame(-1),
  Home: () => (cursorMM.value = [0, 0, 0]),
};

/** Does what the key says, if it says anything. Keys with Ctrl, Alt or Meta are left to the browser. */
export function steer(event: KeyboardEvent, grid: Grid): void {
  const move = moves[event.key];
  if (!move || event.ctrlKey || event.altKey || event.metaKey) return;
  event.preventDefault();
  move(grid);
}
