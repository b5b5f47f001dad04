// Modules that the build makes or takes along: go run ./build site.

declare module "torrloom:worker" {
  /** The whole script of an engine worker: Go's own loader and worker.ts. */
  const text: string;
  export default text;
}

declare module "*.css";
