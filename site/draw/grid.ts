// Where voxels lie. Indices and mm follow the engine: x-fastest arrays, right-handed x, y, z, origin at the gradient
// centre, voxel centres at (i - floor(n/2)) * size.

export type Triple = [x: number, y: number, z: number];

export interface Grid {
  n: Triple;
  voxelMM: Triple;
  originMM: Triple;
}

export type Plane = "xy" | "xz" | "yz";

/** The axes of a plane: u runs to the right on the screen, v runs up, w is the slice direction. */
export interface Axes {
  u: 0 | 1 | 2;
  v: 0 | 1 | 2;
  w: 0 | 1 | 2;
}

const axesOfPlane: Record<Plane, Axes> = {
  xy: { u: 0, v: 1, w: 2 },
  xz: { u: 0, v: 2, w: 1 },
  yz: { u: 1, v: 2, w: 0 },
};

export const planes: Plane[] = ["xy", "xz", "yz"];

export const axisNames = ["x", "y", "z"] as const;

export function axesOf(plane: Plane): Axes {
  return axesOfPlane[plane];
}

export function voxelsOf(grid: Grid): number {
  return grid.n[0] * grid.n[1] * grid.n[2];
}

export function isFlat(grid: Grid): boolean {
  return grid.n[2] === 1;
}

/** Returns the indices of the voxel nearest to a place, kept inside the grid. */
export function voxelAt(grid: Grid, mm: Triple): Triple {
  return mm.map((at, axis) => {
    const i = Math.round((at - grid.originMM[axis]) / grid.voxelMM[axis]);
    return Math.min(Math.max(i, 0), grid.n[axis] - 1);
  }) as Triple;
}

/** Returns the centre of a voxel in mm. */
export function centreOf(grid: Grid, voxel: Triple): Triple {
  return voxel.map((i, axis) => grid.originMM[axis] + i * grid.voxelMM[axis]) as Triple;
}

export function indexOf(grid: Grid, [ix, iy, iz]: Triple): number {
  return (iz * grid.n[1] + iy) * grid.n[0] + ix;
}

/** Returns the index steps of one voxel along x, y and z. */
export function stridesOf(grid: Grid): Triple {
  return [1, grid.n[0], grid.n[0] * grid.n[1]];
}

export function sameGrid(a: Grid, b: Grid): boolean {
  return (["n", "voxelMM", "originMM"] as const).every((key) => a[key].every((value, axis) => value === b[key][axis]));
}

/** Tells whether a voxel lies in the circle or sphere that every spoke sees; the corners outside it hold no answer. */
export function insideFieldOfView(grid: Grid, voxel: Triple): boolean {
  const [x, y, z] = centreOf(grid, voxel);
  const radius = (grid.n[0] * grid.voxelMM[0]) / 2;
  return x * x + y * y + z * z <= radius * radius;
}
