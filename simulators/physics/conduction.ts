/** A body cut into equal layers along one coordinate. Per m² of a slab, per radian and metre of a cylinder. */
export interface ConductionGrid {
  cells: number
  spacingM: number
  /** Area of each face between layers, the two outer ones included: cells + 1 values. */
  faceArea: Float64Array
  /** Volume of each layer. */
  volume: Float64Array
  /** Room for the elimination, kept with the grid so that a step allocates nothing. */
  scratch: Float64Array
}

/** A face's exchange with what is around it: `conductance` W/m²K towards `drivingC` °C. Zero is insulated. */
export interface Boundary {
  conductance: number
  drivingC: number
}

/** Conductivity in W/mK and heat capacity by volume in J/m³K. */
export interface Material {
  conductivity: number
  heatCapacity: number
}

/**
 * Layers for a slab `extentM` thick, or a cylinder or sphere of radius `extentM`.
 * A slab has a free face at either end, a round body only the outer one.
 */
export function conductionGrid(options: {
  shape: 'slab' | 'cylinder' | 'sphere'
  extentM: number
  cells: number
}): ConductionGrid {
  const { shape, extentM, cells } = options
  if (!(extentM > 0) || !(cells >= 2)) throw new RangeError('A body needs an extent and at least two layers.')
  const spacingM = extentM / cells
  const power = { slab: 0, cylinder: 1, sphere: 2 }[shape]
  const faceArea = Float64Array.from({ length: cells + 1 }, (_, face) => (face * spacingM) ** power)
  const volume = Float64Array.from(
    { length: cells },
    (_, cell) => (((cell + 1) * spacingM) ** (power + 1) - (cell * spacingM) ** (power + 1)) / (power + 1),
  )
  return { cells, spacingM, faceArea, volume, scratch: new Float64Array(cells) }
}

/**
 * Carries the layers' temperatures (°C, changed in place) over `stepS` seconds of one-dimensional conduction.
 *
 * Finite volumes with the Crank–Nicolson rule, second order in space and time, the boundaries taken as constant
 * over the step; the tridiagonal system is solved by elimination (Thomas). Stable for any step; free of
 * ripples while stepS is below about spacing²/diffusivity (three minutes for 5 mm of beef).
 */
export function conductionStep(
  grid: ConductionGrid,
  temperatures: Float64Array,
  material: Material,
  stepS: number,
  inner: Boundary,
  outer: Boundary,
): void {
  const { cells, spacingM, faceArea, volume, scratch } = grid
  const between = material.conductivity / spacingM
  let before = 0
  let left = seriesConductance(inner, material, spacingM) * at(faceArea, 0)
  for (let cell = 0; cell < cells; cell++) {
    const last = cell === cells - 1
    const right = last
      ? seriesConductance(outer, material, spacingM) * at(faceArea, cells)
      : between * at(faceArea, cell + 1)
    const here = at(temperatures, cell)
    const leftC = cell === 0 ? inner.drivingC : before
    const rightC = last ? outer.drivingC : at(temperatures, cell + 1)
    const storage = (material.heatCapacity * at(volume, cell)) / stepS
    let diagonal = storage + (left + right) / 2
    let source = storage * here + (left * (leftC - here) + right * (rightC - here)) / 2
    // The half of the exchange that belongs to the step's end: known at the boundaries, unknown between layers.
    if (cell === 0) source += (left * inner.drivingC) / 2
    else {
      const factor = left / 2
      diagonal -= factor * at(scratch, cell - 1)
      source += factor * at(temperatures, cell - 1)
    }
    if (last) source += (right * outer.drivingC) / 2
    before = here
    scratch[cell] = last ? 0 : right / 2 / diagonal
    temperatures[cell] = source / diagonal
    left = right
  }
  for (let cell = cells - 2; cell >= 0; cell--) {
    temperatures[cell] = at(temperatures, cell) + at(scratch, cell) * at(temperatures, cell + 1)
  }
}

/** Temperature of a face, °C, between its layer's centre and its surroundings. */
export function faceTemperature(
  grid: ConductionGrid,
  layerC: number,
  material: Material,
  boundary: Boundary,
): number {
  const inside = (2 * material.conductivity) / grid.spacingM
  return (inside * layerC + boundary.conductance * boundary.drivingC) / (inside + boundary.conductance)
}

/** From the first layer's centre to the surroundings: half a layer and the film in series, W/m²K. */
function seriesConductance(boundary: Boundary, material: Material, spacingM: number): number {
  if (boundary.conductance <= 0) return 0
  return 1 / (1 / boundary.conductance + spacingM / (2 * material.conductivity))
}

function at(values: Float64Array, index: number): number {
  return values[index] ?? 0
}
