import {
  createPieceSimulation,
  createPitSimulation,
  createWeather,
  drawPieceTraits,
} from '../../../simulators/cook.ts'
import type { DrawKitchen } from './kitchen.ts'

/** A kitchen of the product's own simulator, whose physics this generator did not make. */
export const drawSimulatorKitchen: DrawKitchen = (random, _house, { rawKg, cured, habit, setC }) => {
  const seed = String(random.uniform())
  const weather = createWeather({ seed, elevationM: 220, longitudeDeg: -90 })
  const piece = createPieceSimulation({
    traits: drawPieceTraits(random, { rawKg, cured }),
    startCoreC: 2 + 6 * random.uniform(),
  })
  const startMs = Date.UTC(2026, 0, 1, 23) + 86_400_000 * Math.floor(300 * random.uniform())
  const pit = createPitSimulation({ seed, kind: habit.kind, setC, startMs })
  return {
    minute: (set) => {
      pit.setTo(set)
      const sky = weather(pit.atMs)
      for (let turn = 0; turn < 6; turn++) {
        pit.step(10, sky)
        piece.step(10, {
          airC: pit.airC,
          humidityRatio: pit.humidityRatio,
          film: pit.film,
          pressurePa: sky.pressurePa,
        })
      }
      return { pitC: pit.probeC, coreC: piece.coreC }
    },
    wrap: (method) => {
      piece.wrap(method)
      pit.openDoor(60)
    },
  }
}
