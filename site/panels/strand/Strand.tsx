// One variant as a strip along the chain: settings, amplitude, rate, pO2, distribution. The thread runs through the
// headings and shows how far each stage is.

import type { ComponentChildren } from "preact";
import { acquisition } from "../../store/acquisition";
import { isOlder, type StageName, type Strand } from "../../store/strand";
import { Warnings } from "../acquisition/Acquisition";
import { Map } from "../map/Map";
import { Legend } from "../map/Legend";
import { Numbers } from "../numbers/Numbers";
import { Settings } from "../settings/Settings";
import { StageWords, Thread } from "./Thread";

export function StrandPanel({ strand }: { strand: Strand }) {
  const rateName = strand.plan.value?.frames.rateName ?? acquisition.value?.rateName ?? "";
  return (
    <section class="strand" data-strand={strand.id} aria-labelledby={`strand-${strand.id}`}>
      <h2 id={`strand-${strand.id}`}>{strand.name}</h2>
      <div class="strip">
        <Station strand={strand} title="Settings" stages={["plan"]}>
          <Settings strand={strand} />
        </Station>
        <Station strand={strand} title="Amplitude" stages={["measure", "reconstruct"]}>
          <Map strand={strand} quantity="amplitude" title="amplitude" />
        </Station>
        <Station strand={strand} title={`Rate ${rateName}`} stages={["fit"]}>
          <Map strand={strand} quantity="rate" title={rateName} />
        </Station>
        <Station strand={strand} title="pO₂" stages={["derive"]}>
          <Oxygen strand={strand} />
        </Station>
        <Station strand={strand} title="Distribution" stages={[]}>
          <Numbers strand={strand} />
        </Station>
        <div class="below-maps">
          <Legend strand={strand} />
          <p class="hint" id={`map-keys-${strand.id}`}>
            Keys on a map: arrows move the cursor, Page Up and Page Down (or . and ,) change the slice, [ and ] the
            delay, Home goes to the gradient centre.
          </p>
          <Warnings of={strand.warnings.value} />
        </div>
      </div>
    </section>
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
    <section class="station" aria-label={`${strand.name}: ${title}`}>
      <h3>{title}</h3>
      <Thread strand={strand} stages={stages} />
      {stages.length > 0 ? <StageWords strand={strand} stages={stages} /> : <DistributionWords strand={strand} />}
      {children}
    </section>
  );
}

function DistributionWords({ strand }: { strand: Strand }) {
  return isOlder(strand, "derive") ? (
    <p class="words older">older than the settings</p>
  ) : (
    <p class="words">of the answered voxels</p>
  );
}

function Oxygen({ strand }: { strand: Strand }) {
  if (!strand.recipe.value.calibration) return <NoCalibration />;
  return (
    <>
      <Map strand={strand} quantity="pO2" title="pO₂" />
      <p class="caution">A pO₂ is only as good as the calibration entered.</p>
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
