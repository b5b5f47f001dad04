// Undo and redo of one value. Changes of the same leaf in quick succession, as typing makes them, are one step.

import { computed, signal } from "@preact/signals";

const oneStepMS = 1000;
const mostSteps = 200;

export class History<Value> {
  private readonly past = signal<Value[]>([]);
  private readonly future = signal<Value[]>([]);
  private last = { leaf: "", at: -Infinity };
  readonly canUndo = computed(() => this.past.value.length > 0);
  readonly canRedo = computed(() => this.future.value.length > 0);

  /** Notes that a leaf is about to change away from before. */
  note(leaf: string, before: Value): void {
    const now = performance.now();
    const sameStep = leaf === this.last.leaf && now - this.last.at < oneStepMS;
    this.last = { leaf, at: now };
    this.future.value = [];
    if (!sameStep) this.past.value = [...this.past.value.slice(-mostSteps), before];
  }

  /** Returns the value before the last step, or undefined when there is none. */
  undo(present: Value): Value | undefined {
    return this.step(this.past, this.future, present);
  }

  redo(present: Value): Value | undefined {
    return this.step(this.future, this.past, present);
  }

  private step(from: { value: Value[] }, to: { value: Value[] }, present: Value): Value | undefined {
    const value = from.value.at(-1);
    if (value === undefined) return undefined;
    from.value = from.value.slice(0, -1);
    to.value = [...to.value, present];
    this.last = { leaf: "", at: -Infinity };
    return value;
  }
}
