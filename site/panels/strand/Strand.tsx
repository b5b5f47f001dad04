// One variant as a strip along the chain: settings, amplitude, rate, pO2, distribution. The thread runs through the
// headings and shows how far each stage is. All but the first can hide their settings, so that maps stand close.

import type { ComponentChildren } from "preact";
import { useState } from "preact/hooks";
import { acquisition } from "../../store/acquisition";
import { isCoarse, isOlder, strands, type StageName, type Strand } from "../../store/strand";
import { touch, touched } from "../../store/variants";
import { Warnings } from "../acquisition/Acquisition";
import { Map } from "../map/Map";
import { Legend } from "../map/Legend";
import { Numbers } from "../numbers/Numbers";
import { Settings } from "../settings/Settings";
import { Heading } from "./Heading";
import { StageWords, Thread } from "./Thread";

export function StrandPanel({ strand }: { strand: Strand }) {
  const [hidden, setHidden] = useState(false);
  const folded = hidden && strand !== strands.value[0];
  const isTouched = strands.value.length > 1 && touched.value === strand;
  return (
    <section
      class="strand"
      data-strand={strand.id}
      data-folded={folded || undefined}
      data-touched={isTouched || undefined}
      aria-label={strand.name.value}
      onFocusIn={() => touch(strand)}
      onPointerDown={() => touch(strand)}
    >
      <Heading strand={strand} folded={folded} fold={setHidden} />
      <div class="strip">
        <Station strand={strand} title="Settings" stages={["plan"]}>
          {!folded && <Settings strand={strand} />}
        </Station>
        <Maps strand={strand} folded={folded} />
        <Station strand={strand} title="Distribution" stages={[]}>
          <Numbers strand={strand} brief={folded} />
        </Station>
        <div class="below-maps">
          {!folded && <Legend strand={strand} />}
          {!folded && <Hint strand={strand} />}
          <Warnings of={strand.warnings.value} />
        </div>
      </div>
    </section>
  );
}

function Maps({ strand, folded }: { strand: Strand; folded: boolean }) {
  const rateName = strand.plan.value?.frames.rateName ?? acquisition.value?.rateName ?? "";
  return (
    <>
      <Station strand={strand} title="Amplitude" stages={["measure", "reconstruct"]}>
        <Map strand={strand} quantity="amplitude" title="amplitude" plain={folded} />
      </Station>
      <Station strand={strand} title={`Rate ${rateName}`} stages={["fit"]}>
        <Map strand={strand} quantity="rate" title={rateName} plain={folded} />
      </Station>
      <Station strand={strand} title="pO₂" stages={["derive"]}>
        <Oxygen strand={strand} folded={folded} />
      </Station>
    </>
  );
}

interface StationProps {
  strand: Strand;
  title: string;
  stages: StageName[];
  children: ComponentChildren;
}

function Station({ strand, title, stages, children }: StationProps) {
  return (
    <section class="station" aria-label={`${strand.name.value}: ${title}`}>
      <h3>{title}</h3>
      <Thread strand={strand} stages={stages} />
      {stages.length > 0 ? <StageWords strand={strand} stages={stages} /> : <DistributionWords strand={strand} />}
      {children}
    </section>
  );
}

function DistributionWords({ strand }: { strand: Strand }) {
  if (isOlder(strand, "derive")) return <p class="words older">older than the settings</p>;
  if (isCoarse(strand, "derive")) return <p class="words older">of the coarse map</p>;
  return <p class="words">of the answered voxels</p>;
}

function Hint({ strand }: { strand: Strand }) {
  return (
    <p class="hint" id={`map-keys-${strand.id}`}>
      Keys on a map: arrows move the cursor, Page Up and Page Down (or . and ,) change the slice, [ and ] the{" "}
      {strand.plan.value?.frames.kind ?? "delay"}, Home goes to the gradient centre.
    </p>
  );
}

function Oxygen({ strand, folded }: { strand: Strand; folded: boolean }) {
  if (!strand.recipe.value.calibration) return <NoCalibration />;
  return (
    <>
      <Map strand={strand} quantity="pO2" title="pO₂" plain={folded} />
      {!folded && <p class="caution">A pO₂ is only as good as the calibration entered.</p>}
    </>
  );
}

function NoCalibration() {
  return (
    <div class="no-map" data-no-calibration>
      <p>There is no pO₂ map without a calibration.</p>
      <p>
        Tick <b>convert to pO₂</b> in the settings and enter the zero and the slope of this probe, in this medium and at
        this temperature. Then pO₂ = (rate − zero) / slope in every voxel.
      </p>
      <p class="caution">A pO₂ is only as good as the calibration entered.</p>
    </div>
  );
}
