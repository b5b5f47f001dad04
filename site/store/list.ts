// Lists of whole numbers as a person writes them: "3, 17, 40-44".

// A range typed by mistake must not fill the memory.
const mostEntries = 100_000;

/** Returns the numbers of a text in order, each once, or null when it cannot be read. */
export function listOf(text: string): number[] | null {
  const parts = text.replace(/\s*[-–]\s*/g, "-").split(/[\s,;]+/);
  const all = new Set<number>();
  for (const part of parts.filter((part) => part !== "")) {
    const range = /^(\d{1,9})(?:-(\d{1,9}))?$/.exec(part);
    if (!range) return null;
    const [from, to] = [Number(range[1]), Number(range[2] ?? range[1])];
    if (to < from || to - from >= mostEntries) return null;
    for (let n = from; n <= to; n++) all.add(n);
  }
  return [...all].sort((a, b) => a - b);
}

/** Returns a list as text; three or more in a row are a range. */
export function textOfList(list: number[]): string {
  const parts: string[] = [];
  for (let i = 0; i < list.length; ) {
    let end = i;
    while (end + 1 < list.length && list[end + 1] === list[end] + 1) end++;
    if (end - i < 2) end = i;
    parts.push(end > i ? `${list[i]}-${list[end]}` : String(list[i]));
    i = end + 1;
  }
  return parts.join(", ");
}
