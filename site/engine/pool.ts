// The engines of the page: as many workers as the machine has cores for, each holding the open acquisition, so that
// any of them can do any job. A worker that dies, is cancelled or has grown too large is replaced, and the new one
// opens the same files again from the page's copy.

import workerText from "torrloom:worker";
import { type Hello, type Opened, type Progress, type Requests, WireVersion } from "../wire.gen";
import { type Answer, Client } from "./client";
import { Cancelled, EngineFault } from "./fault";
import { compileModule } from "./module";

export { Cancelled, EngineFault } from "./fault";

/** Bytes of a request. A File is read when it is sent, and again when a new worker has to open it. */
export type Input = Blob | ArrayBuffer | ArrayBufferView<ArrayBuffer>;

export interface Options {
  /** Hand the buffers over instead of copying them: they are empty afterwards. Ignored by open and demo. */
  transfer?: boolean;
  /** Called at most ten times a second. */
  onProgress?: (progress: Progress) => void;
  /** Index of the one worker that may do this. */
  worker?: number;
  /** Gives up this one request when it aborts, and leaves all others alone. */
  signal?: AbortSignal;
}

export interface Result<K extends keyof Requests> {
  body: Requests[K]["reply"];
  /** Each buffer as the engine's message says, little-endian. */
  buffers: ArrayBuffer[];
}

const mostWorkers = 4;
// Memory of WebAssembly never shrinks, so a worker that has grown past this is replaced when it is done.
const memoryLimitBytes = 2 ** 30;
// A worker that fails to start this often in a row is left alone.
const mostFailures = 3;

// What takes a moment goes before what takes long, so that a change of one variant is answered while others are made.
const momentary = new Set<string>(["plan", "measure", "traces", "derive", "export"]);

interface Job {
  kind: string;
  body: string;
  inputs: Input[];
  options: Options;
  resolve: (answer: Answer) => void;
  reject: (error: Error) => void;
}

/** The open acquisition: what has to be said to a new worker so that it holds it too. */
interface Held {
  kind: "open" | "demo";
  body: string;
  inputs: Input[];
  digests: string;
}

interface Slot {
  index: number;
  client: Client;
  /** What the worker has open. */
  holds: Held | null;
  state: "preparing" | "free" | "busy" | "broken";
  job: Job | null;
  failures: number;
  /** Memory of the worker when nothing but the acquisition was in it. */
  restingBytes: number;
}

export class Engine {
  private readonly slots: Slot[] = [];
  private queue: Job[] = [];
  private held: Held | null = null;
  /** The open or demo request that is under way; other jobs wait for it. */
  private opening: Job | null = null;

  private constructor(
    private readonly module: WebAssembly.Module,
    private readonly scriptURL: string,
    readonly workers: number,
  ) {}

  /** What the first engine said: version, build, limits, catalogue. */
  hello!: Hello;

  /** Compiles the program and starts the workers. Resolves when the first has said hello. */
  static async start(workers: number): Promise<Engine> {
    const scriptURL = URL.createObjectURL(new Blob([workerText], { type: "text/javascript" }));
    const engine = new Engine(await compileModule("engine-module"), scriptURL, workers);
    for (let index = 0; index < workers; index++) engine.slots.push(engine.newSlot(index));
    engine.hello = await Promise.any(engine.slots.map((slot) => slot.client.hello)).catch((all: AggregateError) => {
      throw all.errors[0];
    });
    if (engine.hello.version !== WireVersion) throw new EngineFault(otherVersion(engine.hello.version));
    return engine;
  }

  /**
   * Asks the engine for one thing. Jobs run on free workers in the order in which they came, those of a moment before
   * long ones. An open or demo request first cancels all else, then one worker answers it, and the others follow on
   * their own.
   * Rejects with EngineFault or Cancelled.
   */
  async request<K extends keyof Requests>(
    kind: K,
    body: Requests[K]["body"],
    inputs: Input[] = [],
    options: Options = {},
  ): Promise<Result<K>> {
    const opens = kind === "open" || kind === "demo";
    if (opens) this.cancel();
    this.retryIfAllBroken(opens);
    const answer = await new Promise<Answer>((resolve, reject) => {
      const transfer = options.transfer && !opens;
      const job: Job = { kind, body: JSON.stringify(body), inputs, options: { ...options, transfer }, resolve, reject };
      if (options.signal?.aborted) return reject(new Cancelled());
      options.signal?.addEventListener("abort", () => this.giveUp(job), { once: true });
      if (opens) this.opening = job;
      else this.queue.push(job);
      this.schedule();
    });
    return { body: JSON.parse(answer.body) as Requests[K]["reply"], buffers: answer.buffers };
  }

  /** Gives up everything that runs or waits. The acquisition stays open. */
  cancel(): void {
    const given = this.queue;
    if (this.opening) given.push(this.opening);
    this.queue = [];
    this.opening = null;
    for (const slot of this.slots) {
      if (slot.state !== "busy") continue;
      slot.job?.reject(new Cancelled());
      this.renew(slot);
    }
    for (const job of given) job.reject(new Cancelled());
  }

  /** Gives up one job, whether it waits or runs. One that has ended stays as it is. */
  private giveUp(job: Job): void {
    job.reject(new Cancelled());
    this.queue = this.queue.filter((waiting) => waiting !== job);
    for (const slot of this.slots) if (slot.job === job) this.renew(slot);
  }

  private newSlot(index: number): Slot {
    const client = new Client(this.module, this.scriptURL);
    const slot: Slot = {
      index,
      client,
      holds: null,
      state: "preparing",
      job: null,
      failures: 0,
      restingBytes: 0,
    };
    void this.prepare(slot);
    return slot;
  }

  /** Ends the slot's worker, which rejects its job, and starts another. */
  private renew(slot: Slot): void {
    slot.client.stop();
    slot.client = new Client(this.module, this.scriptURL);
    slot.holds = null;
    slot.job = null;
    slot.state = "preparing";
    void this.prepare(slot);
  }

  /** Brings the slot's worker to where it can take jobs: started, with the page's acquisition open. */
  private async prepare(slot: Slot): Promise<void> {
    const { client } = slot;
    slot.state = "preparing";
    try {
      await client.hello;
      while (slot.holds !== this.held && slot.client === client) await this.reopen(slot, client);
    } catch (error) {
      if (slot.client === client) this.countFailure(slot, error as Error);
      return;
    }
    if (slot.client !== client) return;
    slot.failures = 0;
    slot.restingBytes = client.memoryBytes;
    slot.state = "free";
    this.schedule();
  }

  private async reopen(slot: Slot, client: Client): Promise<void> {
    const held = this.held;
    if (!held) return;
    const { kind, body, inputs } = held;
    const answer = await client.run({ kind, body, buffers: await bytesOf(inputs, {}, body) });
    if (digestsOf(answer.body) !== held.digests) throw new EngineFault(changedFile("", "since it was opened"));
    slot.holds = held;
  }

  private countFailure(slot: Slot, error: Error): void {
    slot.failures++;
    if (slot.failures < mostFailures) return this.renew(slot);
    slot.state = "broken";
    slot.client.stop();
    if (this.slots.every((s) => s.state === "broken")) this.rejectAll(error);
  }

  /** Gives every worker one more chance. An acquisition that no worker could open is forgotten for the sake of the next. */
  private retryIfAllBroken(opens: boolean): void {
    if (!this.slots.every((slot) => slot.state === "broken")) return;
    if (opens) this.held = null;
    for (const slot of this.slots) {
      slot.failures = mostFailures - 1;
      this.renew(slot);
    }
  }

  private rejectAll(error: Error): void {
    const given = this.queue;
    if (this.opening) given.push(this.opening);
    this.queue = [];
    this.opening = null;
    for (const job of given) job.reject(error);
  }

  private schedule(): void {
    for (const slot of this.slots) {
      if (slot.state !== "free") continue;
      const job = this.nextJob(slot);
      if (job) void this.runJob(slot, job);
    }
  }

  private nextJob(slot: Slot): Job | undefined {
    if (this.opening) return this.slots.some((s) => s.job === this.opening) ? undefined : this.opening;
    const mine = this.queue.filter(({ options }) => this.mayRun(slot, options.worker));
    const next = mine.find(({ kind }) => momentary.has(kind)) ?? mine[0];
    this.queue = this.queue.filter((job) => job !== next);
    return next;
  }

  private mayRun(slot: Slot, wanted: number | undefined): boolean {
    if (wanted === undefined || wanted === slot.index) return true;
    return this.slots[wanted]?.state === "broken" || this.slots[wanted] === undefined;
  }

  private async runJob(slot: Slot, job: Job): Promise<void> {
    const { client } = slot;
    slot.state = "busy";
    slot.job = job;
    try {
      const buffers = await bytesOf(job.inputs, job.options, job.body);
      const answer = await client.run({ ...job, buffers, onProgress: job.options.onProgress });
      if (job === this.opening) this.hold(slot, job, answer);
      job.resolve(answer);
    } catch (error) {
      job.reject(error as Error);
    }
    if (job === this.opening) this.opening = null;
    if (slot.client === client) this.release(slot);
    this.schedule();
  }

  /** Remembers what was opened, and lets the workers that are free open it too. */
  private hold(slot: Slot, job: Job, answer: Answer): void {
    const kind = job.kind as Held["kind"];
    this.held = { kind, body: job.body, inputs: job.inputs, digests: digestsOf(answer.body) };
    slot.holds = this.held;
    slot.restingBytes = answer.memoryBytes;
    for (const other of this.slots) {
      if (other.state === "free") void this.prepare(other);
      if (other.state === "broken") this.renew(other);
    }
  }

  private release(slot: Slot): void {
    slot.job = null;
    const { alive, memoryBytes } = slot.client;
    if (!alive || memoryBytes > Math.max(memoryLimitBytes, slot.restingBytes)) this.renew(slot);
    else slot.state = "free";
  }
}

/** Starts the engine of the page. Rejects with an EngineFault that says why it cannot run and what to try. */
export async function startEngine(): Promise<Engine> {
  try {
    const cores = navigator.hardwareConcurrency || 1;
    const engine = await Engine.start(Math.max(1, Math.min(mostWorkers, cores)));
    // For the browser's console, and for the tests.
    Object.assign(globalThis, { torrloomEngine: engine });
    performance.mark("engine-ready");
    return engine;
  } catch (error) {
    if (error instanceof EngineFault) throw error;
    throw new EngineFault(noStart(error));
  }
}

/** Reads and copies the inputs of a job, so that what is sent can be handed over. */
async function bytesOf(inputs: Input[], options: Options, body: string): Promise<Uint8Array<ArrayBuffer>[]> {
  const all: Uint8Array<ArrayBuffer>[] = [];
  for (const input of inputs) {
    if (input instanceof Blob) all.push(await bytesOfBlob(input, body));
    else if (ArrayBuffer.isView(input)) {
      const view = new Uint8Array(input.buffer, input.byteOffset, input.byteLength);
      all.push(options.transfer ? view : view.slice());
    } else all.push(new Uint8Array(options.transfer ? input : input.slice(0)));
  }
  return all;
}

async function bytesOfBlob(blob: Blob, body: string): Promise<Uint8Array<ArrayBuffer>> {
  try {
    return new Uint8Array(await blob.arrayBuffer());
  } catch {
    throw new EngineFault(changedFile(blob instanceof File ? blob.name : body, "since you picked it"));
  }
}

function digestsOf(body: string): string {
  return JSON.stringify((JSON.parse(body) as Opened).inputs);
}

function changedFile(where: string, when: string) {
  return { kind: "bad-file", where, text: `the file has changed or gone ${when}; drop it again` };
}

function otherVersion(version: number) {
  const text = `page and engine are of different versions (${WireVersion} and ${version}); get the file again`;
  return { kind: "bug", where: "start", text };
}

function noStart(error: unknown) {
  const text = `the engine cannot start in this browser (${String(error)}); update the browser, or get the file again`;
  return { kind: "unsupported", where: "start", text };
}
