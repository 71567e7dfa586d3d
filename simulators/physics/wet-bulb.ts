import { humidityRatio } from './humidity-ratio.ts'
import { saturationPressurePa } from './saturation-pressure.ts'

/**
 * Thermodynamic wet bulb temperature, °C, of air at `airC` with a humidity ratio in kg/kg at `pressurePa`:
 * where a fully wet surface fed by nothing but that air would settle.
 *
 * ASHRAE Fundamentals 2017, chapter 1, equation 33 (above freezing) and 35 (below), solved by bisection to
 * 0.0005 K. Supersaturated air has no wet bulb below its own temperature: an error.
 */
export function wetBulbC(airC: number, ratio: number, pressurePa: number): number {
  if (!(ratio >= 0) || humidityRatio(saturationPressurePa(airC), pressurePa) < ratio * (1 - 1e-9)) {
    // Above the boiling point the saturation pressure passes the air's: any ratio can be held there.
    if (!(ratio >= 0) || saturationPressurePa(airC) < pressurePa) {
      throw new RangeError(`Air at ${airC} °C cannot hold ${ratio} kg/kg.`)
    }
  }
  let low = -100
  let high = airC
  while (high - low > 0.0005) {
    const middle = (low + high) / 2
    if (ratioForWetBulb(airC, middle, pressurePa) > ratio) high = middle
    else low = middle
  }
  return (low + high) / 2
}

function ratioForWetBulb(airC: number, wetC: number, pressurePa: number): number {
  const saturationPa = saturationPressurePa(wetC)
  if (saturationPa >= pressurePa) return Number.POSITIVE_INFINITY
  const saturated = humidityRatio(saturationPa, pressurePa)
  return wetC >= 0
    ? ((2501 - 2.326 * wetC) * saturated - 1.006 * (airC - wetC)) / (2501 + 1.86 * airC - 4.186 * wetC)
    : ((2830 - 0.24 * wetC) * saturated - 1.006 * (airC - wetC)) / (2830 + 1.86 * airC - 2.1 * wetC)
}
