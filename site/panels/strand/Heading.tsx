// Head of a strand: its name, to be changed in place; what sets it apart from the first; and what can be done with it.

import { useRef } from "preact/hooks";
import { differences } from "../../store/difference";
import { hello } from "../../store/engine";
import { strands, type Strand } from "../../store/strand";
import { addVariant, removeVariant, rename } from "../../store/variants";

interface Props {
  strand: Strand;
  folded: boolean;
  fold: (folded: boolean) => void;
}

export function Heading({ strand, folded, fold }: Props) {
  return (
    <div class="strand-head">
      <h2 class="unseen">{strand.name.value}</h2>
      <Name strand={strand} />
      <Difference strand={strand} />
      <Actions strand={strand} folded={folded} fold={fold} />
    </div>
  );
}

/** Where the name of a strand is written, by which the focus finds a new one. */
export function nameID({ id }: Strand): string {
  return `name-${id}`;
}

function Name({ strand }: { strand: Strand }) {
  const input = useRef<HTMLInputElement>(null);
  const name = strand.name.value;
  const take = () => {
    rename(strand, input.current!.value);
    input.current!.value = strand.name.value;
  };
  return (
    <input
      id={nameID(strand)}
      class="strand-name"
      data-name
      ref={input}
      type="text"
      maxLength={40}
      size={Math.max(name.length, 6)}
      aria-label="name of this variant"
      spellcheck={false}
      value={name}
      onChange={take}
      onKeyDown={(event) => event.key === "Enter" && take()}
    />
  );
}

/** Says in words what is set otherwise than in the first strand, and nothing else. */
function Difference({ strand }: { strand: Strand }) {
  const reference = strands.value[0];
  if (strands.value.length < 2) return null;
  if (strand === reference) return <p class="difference">the reference of the others</p>;
  const phrases = differences(hello.value?.catalogue ?? [], strand.recipe.value, reference.recipe.value);
  return (
    <p class="difference" data-difference>
      {phrases.length > 0 ? phrases.join("; ") : `set like ${reference.name.value}`}
    </p>
  );
}

function Actions({ strand, folded, fold }: Props) {
  const { name } = strand;
  const several = strands.value.length > 1;
  return (
    <p class="strand-actions">
      {strand !== strands.value[0] && (
        <button
          type="button"
          data-action="fold"
          aria-expanded={!folded}
          aria-label={`settings of ${name.value}`}
          onClick={() => fold(!folded)}
        >
          {folded ? "Settings" : "Hide settings"}
        </button>
      )}
      {several && (
        <button
          type="button"
          data-action="remove"
          aria-label={`Remove ${name.value}`}
          onClick={() => focusSoon(besideOf(strand), () => removeVariant(strand))}
        >
          Remove
        </button>
      )}
      <button
        type="button"
        data-action="add"
        aria-label={`Add variant of ${name.value}`}
        onClick={() => {
          const added = addVariant(strand);
          focusSoon(added, () => {});
        }}
      >
        Add variant
      </button>
    </p>
  );
}

/** Returns the strand that is left in the place of another. */
function besideOf(strand: Strand): Strand {
  const at = strands.value.indexOf(strand);
  return strands.value[at > 0 ? at - 1 : 1];
}

/** Does something, and moves the focus to the name of a strand once that is on the page. */
function focusSoon(strand: Strand, act: () => void): void {
  act();
  requestAnimationFrame(() => document.getElementById(nameID(strand))?.focus());
}
