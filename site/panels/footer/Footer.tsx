// Cautions, and how to check that nothing leaves the machine.

import { hello } from "../../store/engine";

export function Footer() {
  return (
    <footer class="foot">
      <p>
        For research use. Not for diagnosis or treatment planning. Decisions on dose or boost belong to licensed staff,
        their protocols and the local rules. A pO₂ is only as good as the calibration entered.
      </p>
      <p>
        Nothing leaves this machine: switch the network off and everything still works. Build{" "}
        <code data-build>{hello.value?.build ?? "…"}</code>
      </p>
    </footer>
  );
}
