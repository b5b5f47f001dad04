// Files that are dropped on the page. A folder is walked. What a drop holds can be asked for only before the first
// wait, so all items are asked first.

type Dropped = FileSystemHandle | FileSystemEntry | File | null;

interface HandleItem extends DataTransferItem {
  getAsFileSystemHandle?: () => Promise<FileSystemHandle | null>;
}

/** Returns all files of a drop, those in folders included. */
export async function filesOf(transfer: DataTransfer): Promise<File[]> {
  const asked = [...transfer.items].filter((item) => item.kind === "file").map(ask);
  const found = await Promise.all(asked.map(async (one) => walk(await one)));
  return found.flat();
}

/** Prefers handles, then entries, then plain files: a folder looks like a small file in the last. */
function ask(item: HandleItem): Promise<Dropped> | Dropped {
  const file = item.getAsFile();
  const entry = item.webkitGetAsEntry?.() ?? file;
  return item.getAsFileSystemHandle?.().catch(() => entry) ?? entry;
}

async function walk(dropped: Dropped): Promise<File[]> {
  if (!dropped) return [];
  if (dropped instanceof File) return [dropped];
  if ("kind" in dropped) return walkHandle(dropped);
  return dropped.isFile ? [await fileOfEntry(dropped as FileSystemFileEntry)] : walkEntries(dropped);
}

async function walkHandle(handle: FileSystemHandle): Promise<File[]> {
  if (handle.kind === "file") return [await (handle as FileSystemFileHandle).getFile()];
  const all: File[] = [];
  for await (const inner of (handle as FileSystemDirectoryHandle).values()) all.push(...(await walkHandle(inner)));
  return all;
}

function fileOfEntry(entry: FileSystemFileEntry): Promise<File> {
  return new Promise((resolve, reject) => entry.file(resolve, reject));
}

/** A reader gives at most a hundred entries a time, and none at the end. */
async function walkEntries(folder: FileSystemEntry): Promise<File[]> {
  const reader = (folder as FileSystemDirectoryEntry).createReader();
  const all: File[] = [];
  for (;;) {
    const some = await new Promise<FileSystemEntry[]>((resolve, reject) => reader.readEntries(resolve, reject));
    if (some.length === 0) return all;
    for (const entry of some) all.push(...(await walk(entry)));
  }
}
