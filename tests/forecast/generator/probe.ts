import type { Random } from '#shared/domain/random.ts'
import type { TestHouse } from './house.ts'

/** A probe with noise, lag of rounding, spikes, repeated rows, gaps, slips, re-seating and a late start. */
export function drawProbe(random: Random, house: TestHouse) {
  const between = (low: number, high: number) => low + (high - low) * random.uniform()
  const noise = between(0.05, 0.3)
  const rounding = random.uniform() < 0.3 ? 0.5 : 0.1
  const faulty = () => random.uniform() < house.faultShare
  const lateS = faulty() ? between(1200, 6000) : 0
  const slip = faulty()
    ? { fromS: between(7200, 30000), lastsS: between(900, 3600), share: between(0.2, 0.8) }
    : undefined
  const reseat = faulty() ? { fromS: between(7200, 30000), byC: 3 * random.normal() } : undefined
  const spikeChance = between(0, 0.004)
  const gapChance = between(0, 1) / 600
  let gapUntilS = -1
  const round = (value: number) => (Math.round(value / rounding) * rounding).toFixed(1)
  return (atS: number, coreC: number, pitC: number): string[] | null => {
    if (random.uniform() < gapChance) gapUntilS = atS + between(120, random.uniform() < 0.15 ? 5400 : 1200)
    if (atS < gapUntilS) return null
    let core = coreC + noise * random.normal()
    if (slip && atS >= slip.fromS && atS < slip.fromS + slip.lastsS) core += slip.share * (pitC - core)
    if (reseat && atS >= reseat.fromS) core += reseat.byC
    if (random.uniform() < spikeChance) core += (random.uniform() < 0.5 ? -1 : 1) * between(8, 60)
    const coreText = atS < lateS || random.uniform() < 0.003 ? '' : round(core)
    const pitText = random.uniform() < 0.003 ? '' : round(pitC + (random.uniform() < spikeChance ? 80 : 0))
    const row = `${String(atS)},${pitText},${coreText}`
    return random.uniform() < 0.002 ? [row, row] : [row]
  }
}
