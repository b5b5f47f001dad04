// The engine's program: packed into the page as base64 of its gzip, unpacked and compiled once.

// A multiple of 4, so that every piece but the last is whole base64; small enough not to hold up the page.
const pieceLength = 1 << 18;

/** Compiles the program in the script block with the given id. Rejects when the page is damaged or cut short. */
export async function compileModule(id: string): Promise<WebAssembly.Module> {
  const text = document.getElementById(id)?.textContent ?? "";
  const packed = piecesOf(text).pipeThrough(new DecompressionStream("gzip"));
  return WebAssembly.compileStreaming(new Response(packed, { headers: { "Content-Type": "application/wasm" } }));
}

function piecesOf(text: string): ReadableStream<Uint8Array<ArrayBuffer>> {
  let at = 0;
  return new ReadableStream({
    async pull(controller) {
      if (at >= text.length) return controller.close();
      await otherWork();
      controller.enqueue(decode(text.slice(at, at + pieceLength)));
      at += pieceLength;
    },
  });
}

/** Lets the page draw and answer between two pieces. */
function otherWork(): Promise<void> {
  return new Promise((resolve) => setTimeout(resolve));
}

function decode(piece: string): Uint8Array<ArrayBuffer> {
  const characters = atob(piece);
  const bytes = new Uint8Array(characters.length);
  for (let i = 0; i < bytes.length; i++) bytes[i] = characters.charCodeAt(i);
  return bytes;
}
