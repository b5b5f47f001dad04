// Faults as the page keeps them: the engine's words, never replaced by a general sentence.

import { EngineFault } from "../engine/fault";
import type { Fault } from "../wire.gen";

/** Returns whatever was thrown as a fault. */
export function faultOf(error: unknown): Fault {
  if (error instanceof EngineFault) return error.fault;
  return { kind: "bug", where: "page", text: error instanceof Error ? error.message : String(error) };
}

/** Returns "place: text". */
export function wordsOf(fault: Fault): string {
  return fault.where ? `${fault.where}: ${fault.text}` : fault.text;
}
