/** Ratio of the molar masses of water and dry air (ASHRAE Fundamentals 2017, chapter 1). */
const MOLAR_MASS_RATIO = 0.621945

/** Humidity ratio, kg of vapour per kg of dry air, from the vapour's partial pressure in Pa. */
export function humidityRatio(vapourPa: number, pressurePa: number): number {
  return (MOLAR_MASS_RATIO * vapourPa) / (pressurePa - vapourPa)
}

/** The vapour's partial pressure in Pa, from the humidity ratio: the inverse of `humidityRatio`. */
export function vapourPressurePa(ratio: number, pressurePa: number): number {
  return (pressurePa * ratio) / (MOLAR_MASS_RATIO + ratio)
}
