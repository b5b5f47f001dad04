// One chart with its title, and the numbers behind it as a table on demand.

import { useEffect, useRef, useState } from "preact/hooks";
import type { ChartElement } from "../../draw/chart";

export interface Table {
  head: string[];
  rows: string[][];
}

interface Props {
  title: string;
  /** What the chart shows, in one sentence, for those who do not see it. */
  summary: string;
  draw: (width: number) => ChartElement;
  table: () => Table;
}

export function Chart({ title, summary, draw, table }: Props) {
  const box = useRef<HTMLDivElement>(null);
  const width = useWidth(box);
  useEffect(() => {
    if (width <= 0) return;
    const chart = draw(width);
    chart.setAttribute("aria-hidden", "true");
    box.current!.replaceChildren(chart);
  });
  return (
    <figure class="chart">
      <figcaption>{title}</figcaption>
      <div class="chart-box" ref={box} role="img" aria-label={summary} />
      <Numbers title={title} table={table} />
    </figure>
  );
}

/** The numbers behind a drawing, as a table on demand. */
export function Numbers({ title, table }: Pick<Props, "title" | "table">) {
  const [open, setOpen] = useState(false);
  return (
    <details class="behind" onToggle={(event) => setOpen(event.currentTarget.open)}>
      <summary aria-label={`table: ${title}`}>table</summary>
      {open && <TableBox title={title} {...table()} />}
    </details>
  );
}

function TableBox({ title, head, rows }: Table & { title: string }) {
  return (
    <div class="table-box" tabIndex={0} role="group" aria-label={`table: ${title}`}>
      <table>
        <thead>
          <tr>
            {head.map((name) => (
              <th scope="col" key={name}>
                {name}
              </th>
            ))}
          </tr>
        </thead>
        <tbody>
          {rows.map((row, r) => (
            <tr key={r}>
              {row.map((cell, c) => (
                <td key={c}>{cell}</td>
              ))}
            </tr>
          ))}
        </tbody>
      </table>
    </div>
  );
}

/** Returns the width of an element as it is now, in whole pixels. */
export function useWidth(of: { current: HTMLElement | null }): number {
  const [width, setWidth] = useState(0);
  useEffect(() => {
    const watch = new ResizeObserver(([entry]) => setWidth(Math.floor(entry.contentRect.width)));
    watch.observe(of.current!);
    return () => watch.disconnect();
  }, []);
  return width;
}
