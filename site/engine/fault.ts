// The ways in which a request can end without an answer.

import type { Fault } from "../wire.gen";

/** A fault of the engine. The message is the fault's text with its place, to be shown word for word. */
export class EngineFault extends Error {
  override name = "EngineFault";

  constructor(readonly fault: Fault) {
    super(fault.where === "" ? fault.text : `${fault.where}: ${fault.text}`);
  }
}

/** The request was given up on purpose: by cancel, or because another acquisition was opened. */
export class Cancelled extends Error {
  override name = "Cancelled";

  constructor() {
    super("cancelled");
  }
}
