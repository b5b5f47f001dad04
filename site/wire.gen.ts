// Generated from wasm/wire by go run ./build site. Do not edit.

export const WireVersion = 1;

export interface Calibration {
  rate: string;
  zeroPerUS: number;
  slopePerUSPerTorr: number;
  zeroSEPerUS?: number;
  slopeSEPerUSPerTorr?: number;
  correlation?: number;
  concentrationPerUSPerUM?: number;
  concentrationSEPerUSPerUM?: number;
  concentrationUM?: number;
  temperaturePerUSPerC?: number;
  temperatureSEPerUSPerC?: number;
  temperatureC?: number;
  fromTorr?: number;
  toTorr?: number;
}

export interface Choice {
  value: string;
  label: string;
  help: string;
}

export interface Coverage {
  cartesian: boolean;
  values: [number, number, number];
  stepMTPerM: [number, number, number];
  shots: number;
  times: SampleTime[];
}

export interface DemoRequest {
  noise: boolean;
}

export interface DeriveRequest {
  recipe: Recipe;
}

export interface Directions {
  dim: number;
}

export interface DirectionsRequest {
}

export interface ExamineRequest {
  recipe: Recipe;
  rates: Summary | null;
}

export interface ExportRequest {
  recipe: Recipe;
  quantity: string;
  rateName: string;
}

export interface Exported {
  name: string;
  type: string;
}

export interface Failure {
  fault: Fault;
}

export interface FateCount {
  value: number;
  label: string;
  count: number;
}

export interface Fault {
  kind: string;
  where: string;
  text: string;
}

export interface Finding {
  level: string;
  check: string;
  text: string;
  value: number;
  unit: string;
  rule: string;
  source: string;
  advice: string;
  shots: number[];
  delays: number[];
}

export interface FitRequest {
  recipe: Recipe;
  noiseSD: number[];
  voxels: number;
}

export interface Fitted {
  seconds: number;
}

export interface Fraction {
  threshold: number;
  share: number;
}

export interface Frames {
  kind: string;
  timeUS: number[];
  reference: number;
  rateName: string;
}

export interface Hello {
  version: number;
  build: string;
  limits: Limits;
  catalogue: Setting[];
}

export interface Input {
  name: string;
  bytes: number;
  sha256: string;
}

export interface Keys {
  measure: string;
  reconstruct: string;
  fit: string;
  derive: string;
}

export interface Limits {
  memoryBytes: number;
  matrix: number;
}

export interface Mask {
  amplitudeFraction: number;
}

export interface MeasureRequest {
  recipe: Recipe;
}

export interface Measured {
  constants: string;
  warnings: string[];
}

export interface Neighbour {
  shot: number;
  angleDeg: number;
  opposite: boolean;
  real: number[];
  projection: number[];
}

export interface Numbers {
  maskLevel: number;
  fates: FateCount[];
  rate: Summary;
  pO2: Summary | null;
  negative: number;
  warnings: string[];
}

export interface OpenRequest {
  names: string[];
}

export interface Opened {
  name: string;
  madeUp: boolean;
  inputs: Input[];
  delays: number;
  shots: number;
  imageShots: number;
  samples: number;
  dim: number;
  delayUS: number[];
  dwellNS: number;
  timeZeroSample: number;
  sequence: string;
  encoding: string;
  domain: string;
  rateName: string;
  gradientMinMTPerM: number;
  gradientMaxMTPerM: number;
  kMaxPerMM: number;
  resolutionMM: number;
  aliasFreeMM: number;
  extentMM: number;
  referenceDelay: number;
  coverage: Coverage | null;
  signalToNoise: number;
  optional: Optional;
  recipe: Recipe;
  warnings: string[];
}

export interface Optional {
  echo_time_us?: number;
  repetition_us?: number;
  carrier_MHz?: number;
  temperature_C?: number;
  probe?: string;
  note?: string;
  r1_zero_per_us?: number;
  r1_slope_per_us_per_torr?: number;
  r2_zero_per_us?: number;
  r2_slope_per_us_per_torr?: number;
}

export interface Plan {
  recipe: Recipe;
  keys: Keys;
  n: [number, number, number];
  voxelMM: [number, number, number];
  originMM: [number, number, number];
  memoryBytes: number;
  frames: Frames;
  reconstructJobs: number[][];
  fitJobs: [number, number][];
  warnings: string[];
}

export interface PlanRequest {
  recipe: string;
  workers: number;
}

export interface Point {
  objective: number;
  residual: number;
}

export interface Progress {
  stage: string;
  fraction: number;
}

export interface Rates {
  minPerUS: number;
  maxPerUS: number;
}

export interface Recipe {
  recipe: number;
  conditioning: Settings;
  reconstruction: Reconstruction;
  singlePoint: SinglePoint;
  rates: Rates;
  calibration?: Calibration;
  sample: Sample;
  mask: Mask;
}

export interface ReconstructRequest {
  recipe: Recipe;
  constants: string;
  frames: number[];
}

export interface Reconstructed {
  noiseSD: number[];
  seconds: number;
  curve: Point[][];
}

export interface Reconstruction {
  method: string;
  matrix: number;
  fieldOfViewMM: number;
  window: string;
  cutoff: number;
  density: string;
  tolerance: number;
  oversampling: number;
  penalty: string;
  penaltyWeight: number;
  edgeStep: number;
  iterations: number;
}

export interface Report {
  findings: Finding[];
  proposed: Settings;
  shots: number[];
  series: Series[];
  delayUS: number[];
  curve: number[];
}

export interface Sample {
  temperatureC?: number;
  referenceUM?: number;
  referenceSEUM?: number;
  referenceAmplitude?: number;
}

export interface SampleTime {
  sample: number;
  timeUS: number;
  usable: boolean;
  kMaxPerMM: number;
  fieldOfViewMM: number;
  resolutionMM: number;
}

export interface Series {
  name: string;
  label: string;
  unit: string;
  values: number[];
}

export interface Setting {
  path: string;
  group: string;
  label: string;
  unit: string;
  kind: string;
  min: number;
  max: number;
  step: number;
  choices: Choice[];
  help: string;
  methods: string[];
  stage: string;
}

export interface Settings {
  offset: string;
  phase: string;
  timeShiftSamples: number;
  quadratureGain: number;
  quadratureSkewDeg: number;
  shotPhase: string;
  shotTime: string;
  phaseDriftDeg: number;
  frequencyKHz: number;
  frequencyDriftKHz: number;
  amplitudeDrift: number;
  deadSamples: number;
  firstShot: number;
  lastShot: number;
  every: number;
  readoutDecay: string;
  readoutDecayPerUS: number;
  readoutGainCap: number;
  excludeShots?: number[];
  excludeDelays?: number[];
}

export interface ShotRequest {
  recipe: Recipe;
  shot: number;
}

export interface ShotView {
  shot: number;
  delay: number;
  timeNS: number[];
  real: number[];
  imag: number[];
  positionMM: number[];
  projection: number[];
  neighbours: Neighbour[];
  fromImage: number[];
  offNeighbours: number;
  offImage: number;
}

export interface SinglePoint {
  axis: string;
  firstUS: number;
  lastUS: number;
  count: number;
  resolution: string;
}

export interface Summary {
  unit: string;
  count: number;
  mean: number;
  sd: number;
  median: number;
  quartiles: [number, number];
  range: [number, number];
  central90: [number, number];
  medianSE: number;
  medianCalibrationSE: number;
  fractions: Fraction[];
  edges: number[];
  counts: number[];
  below: number;
  above: number;
}

export interface Traces {
  timeNS: number[];
  real: number[];
  imag: number[];
  positionMM: number[];
  projection: number[];
  delayUS: number[];
  echoHeight: number[];
  gradientMTPerM: [number, number, number];
}

export interface TracesRequest {
  delay: number;
  shot: number;
}

export interface Requests {
  open: { body: OpenRequest; reply: Opened };
  demo: { body: DemoRequest; reply: Opened };
  traces: { body: TracesRequest; reply: Traces };
  plan: { body: PlanRequest; reply: Plan };
  measure: { body: MeasureRequest; reply: Measured };
  reconstruct: { body: ReconstructRequest; reply: Reconstructed };
  fit: { body: FitRequest; reply: Fitted };
  derive: { body: DeriveRequest; reply: Numbers };
  examine: { body: ExamineRequest; reply: Report };
  directions: { body: DirectionsRequest; reply: Directions };
  shot: { body: ShotRequest; reply: ShotView };
  export: { body: ExportRequest; reply: Exported };
}
