// One engine: runs the compiled Go program and passes requests to it, one at a time. Go's loader, which defines Go and
// the file functions, stands before this text. A death of the program is told to the page once and for all.

import type { FromWorker, ToWorker } from "./protocol";

type Outcome = { body: string; buffers: Uint8Array<ArrayBuffer>[] } | { fault: string } | undefined;
type Answer = (kind: string, body: string, buffers: Uint8Array[], progress: (text: string) => void) => Outcome;

declare const Go: new () => {
  importObject: WebAssembly.Imports;
  exit: (code: number) => void;
  run: (instance: WebAssembly.Instance) => Promise<void>;
};

const scope = globalThis as unknown as {
  onmessage: (event: MessageEvent<ToWorker>) => void;
  postMessage: (message: FromWorker, transfer?: Transferable[]) => void;
  torrloomReady: (answer: Answer, hello: string) => void;
  fs: { writeSync: (fd: number, bytes: Uint8Array) => number };
};

const firstWordsLimit = 400;
let answer: Answer | undefined;
let memory: WebAssembly.Memory | undefined;
let firstWords = "";
let dead = false;

// What Go prints is kept for the fault instead of the console: the first lines name the cause.
scope.fs.writeSync = (_fd, bytes) => {
  if (firstWords.length < firstWordsLimit) firstWords += new TextDecoder().decode(bytes);
  return bytes.length;
};

function die(cause: unknown): void {
  if (dead) return;
  dead = true;
  const words = firstWords || String(cause);
  scope.postMessage({ type: "dead", lastWords: words.slice(0, firstWordsLimit).split("\n\n")[0].trim() });
}

async function start(module: WebAssembly.Module): Promise<void> {
  const go = new Go();
  go.exit = (code) => die(`the program ended with code ${code}`);
  const instance = await WebAssembly.instantiate(module, go.importObject);
  memory = instance.exports.mem as WebAssembly.Memory;
  scope.torrloomReady = (given, hello) => {
    answer = given;
    scope.postMessage({ type: "hello", hello });
  };
  await go.run(instance);
}

function request(message: ToWorker & { type: "request" }): void {
  const progress = (text: string) => scope.postMessage({ type: "progress", progress: text });
  const outcome = answer?.(message.kind, message.body, message.buffers, progress);
  const memoryBytes = memory?.buffer.byteLength ?? 0;
  if (dead || outcome === undefined) die("the program stopped without an answer");
  else if ("fault" in outcome) scope.postMessage({ type: "fault", failure: outcome.fault, memoryBytes });
  else scope.postMessage({ type: "reply", ...outcome, memoryBytes }, outcome.buffers.map((b) => b.buffer));
}

scope.onmessage = ({ data }) => {
  if (data.type === "start") start(data.module).catch(die);
  else {
    try {
      request(data);
    } catch (error) {
      die(error);
    }
  }
};
