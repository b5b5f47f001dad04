// Light or dark: the system's choice, or a person's. Canvases read their tones again whenever either changes.

import { computed, effect, signal } from "@preact/signals";
import { readTones } from "../draw/tones";

export type Theme = "system" | "light" | "dark";

export const theme = signal<Theme>("system");

const changes = signal(0);

/** The tones that canvases draw with now. */
export const tones = computed(() => {
  void changes.value;
  return readTones();
});

/** Applies the theme to the page from now on. */
export function followTheme(): void {
  effect(() => {
    document.documentElement.dataset.theme = theme.value;
    changes.value = changes.peek() + 1;
  });
  for (const query of ["(prefers-color-scheme: dark)", "(forced-colors: active)"]) {
    matchMedia(query).addEventListener("change", () => changes.value++);
  }
}
