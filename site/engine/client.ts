// One worker, spoken to with promises: one request at a time, any progress, then one reply or one fault.

import type { Failure, Hello, Progress } from "../wire.gen";
import { Cancelled, EngineFault } from "./fault";
import type { FromWorker, ToWorker } from "./protocol";

/** What the engine answered: JSON text, arrays, and how much memory the worker holds now. */
export interface Answer {
  body: string;
  buffers: ArrayBuffer[];
  memoryBytes: number;
}

/** A request as it travels. The buffers are handed over for good. */
export interface Call {
  kind: string;
  body: string;
  buffers: Uint8Array<ArrayBuffer>[];
  onProgress?: (progress: Progress) => void;
}

interface Pending {
  call: Call;
  resolve: (answer: Answer) => void;
  reject: (error: Error) => void;
}

export class Client {
  /** Settles when the engine has said hello or has failed to start. */
  readonly hello: Promise<Hello>;
  /** False once the worker has died or was stopped. */
  alive = true;
  /** Memory of the worker after its last answer. */
  memoryBytes = 0;

  private readonly worker: Worker;
  private pending: Pending | null = null;
  private greet!: (hello: Hello) => void;
  private giveUp!: (error: Error) => void;

  constructor(module: WebAssembly.Module, scriptURL: string) {
    this.hello = new Promise((resolve, reject) => {
      this.greet = resolve;
      this.giveUp = reject;
    });
    this.hello.catch(() => {});
    this.worker = new Worker(scriptURL);
    this.worker.onmessage = ({ data }: MessageEvent<FromWorker>) => this.hear(data);
    this.worker.onerror = (event) => {
      event.preventDefault();
      this.die(event.message ?? "the worker failed");
    };
    this.worker.onmessageerror = () => this.die("a message could not be read");
    this.post({ type: "start", module });
  }

  /** Sends one request. Rejects with an EngineFault, or with Cancelled after stop. */
  run(call: Call): Promise<Answer> {
    return new Promise((resolve, reject) => {
      if (!this.alive || this.pending) return reject(new EngineFault(bug(call.kind, "this engine is not free")));
      this.pending = { call, resolve, reject };
      const { kind, body, buffers } = call;
      this.post({ type: "request", kind, body, buffers }, buffers.map((b) => b.buffer));
    });
  }

  /** Ends the worker at once. */
  stop(): void {
    this.end(new Cancelled());
  }

  private post(message: ToWorker, transfer: Transferable[] = []): void {
    this.worker.postMessage(message, transfer);
  }

  private hear(message: FromWorker): void {
    switch (message.type) {
      case "hello":
        return this.greet(JSON.parse(message.hello) as Hello);
      case "progress":
        return this.pending?.call.onProgress?.(JSON.parse(message.progress) as Progress);
      case "reply":
        return this.settle(message.memoryBytes, ({ resolve }) => {
          resolve({ ...message, buffers: message.buffers.map((b) => b.buffer) });
        });
      case "fault":
        return this.settle(message.memoryBytes, ({ reject }) => {
          reject(new EngineFault((JSON.parse(message.failure) as Failure).fault));
        });
      case "dead":
        return this.die(message.lastWords);
    }
  }

  private settle(memoryBytes: number, finish: (pending: Pending) => void): void {
    const pending = this.pending;
    this.pending = null;
    this.memoryBytes = memoryBytes;
    if (pending) finish(pending);
  }

  private die(lastWords: string): void {
    const kind = this.pending?.call.kind ?? "start";
    this.end(new EngineFault(bug(kind, plainWords(lastWords))));
  }

  private end(error: Error): void {
    this.alive = false;
    this.worker.terminate();
    this.giveUp(error);
    this.settle(this.memoryBytes, ({ reject }) => reject(error));
  }
}

function bug(where: string, text: string) {
  return { kind: "bug", where, text };
}

function plainWords(lastWords: string): string {
  const outOfMemory = /out of memory|allocation|memory access/i.test(lastWords);
  const cause = outOfMemory ? "the engine ran out of memory and stopped" : "the engine broke down and stopped";
  const remedy = outOfMemory ? "lower the matrix size or keep fewer delays" : "try again or change the last setting";
  return `${cause} (${lastWords}); a fresh one takes its place and opens the same files; ${remedy}`;
}
