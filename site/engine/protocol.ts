// What page and worker say to each other. Bodies are JSON text as Go reads and writes it; arrays travel as buffers.

export type ToWorker =
  | { type: "start"; module: WebAssembly.Module }
  | { type: "request"; kind: string; body: string; buffers: Uint8Array[] };

export type FromWorker =
  | { type: "hello"; hello: string }
  | { type: "progress"; progress: string }
  | { type: "reply"; body: string; buffers: Uint8Array<ArrayBuffer>[]; memoryBytes: number }
  | { type: "fault"; failure: string; memoryBytes: number }
  | { type: "dead"; lastWords: string };
