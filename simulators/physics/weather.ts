import { humidityRatio } from './humidity-ratio.ts'
import { saturationPressurePa } from './saturation-pressure.ts'
import { smoothNoise } from './smooth-noise.ts'
import { standardPressurePa } from './standard-pressure.ts'

/** Outside air at one moment. */
export interface Weather {
  airC: number
  humidityRatio: number
  windMps: number
  pressurePa: number
}

/**
 * An invented mid-latitude inland climate: a yearly and a daily wave and fronts that pass in two to four days.
 * Hours follow the sun at the site's longitude, so that no zone table is needed.
 */
export function createWeather(options: {
  seed: string
  elevationM: number
  longitudeDeg: number
}): (atMs: number) => Weather {
  const { seed, elevationM, longitudeDeg } = options
  const front = smoothNoise(`${seed}/front`, 2.5 * DAY_MS)
  const damp = smoothNoise(`${seed}/damp`, 1.5 * DAY_MS)
  const wind = smoothNoise(`${seed}/wind`, DAY_MS / 6)
  const pressurePa = standardPressurePa(elevationM)
  return (atMs) => {
    const solarMs = atMs + (longitudeDeg / 360) * DAY_MS
    const dayShare = (solarMs / DAY_MS) % 1
    // Coldest in mid January, warmest in mid July; coolest before dawn, warmest at three in the afternoon.
    const yearly = -13 * Math.cos((2 * Math.PI * (solarMs / DAY_MS - 15)) / 365.2425)
    const daily = 5 * Math.cos(2 * Math.PI * (dayShare - 15 / 24))
    const airC = 13 + yearly + daily + 4 * front(atMs) - 0.0065 * elevationM
    const relative = Math.min(0.98, Math.max(0.25, 0.66 - 0.02 * daily + 0.13 * damp(atMs)))
    return {
      airC,
      humidityRatio: humidityRatio(relative * saturationPressurePa(airC), pressurePa),
      windMps: Math.max(0, 3 + 2 * wind(atMs)),
      pressurePa,
    }
  }
}

const DAY_MS = 86_400_000
