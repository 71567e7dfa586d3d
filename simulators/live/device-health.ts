import type { SenmlRecord } from '#shared/contract/senml.ts'

import { smoothNoise } from '../physics/smooth-noise.ts'

/** A box's battery and radio at a moment, as SenML records; the battery is charged every five weeks. */
export function deviceHealth(seed: string): (atMs: number) => SenmlRecord[] {
  const phase = 0.5 + 0.2 * smoothNoise(seed, 1e12)(0)
  const radio = smoothNoise(`${seed}/radio`, 20 * 60_000)
  return (atMs) => {
    const worn = (((atMs / CHARGE_MS + phase) % 1) + 1) % 1
    return [
      { n: 'battery', u: '%EL', v: Math.round(100 - 70 * worn) },
      { n: 'signal', u: 'dBm', v: Math.round(-58 + 5 * radio(atMs)) },
    ]
  }
}

const CHARGE_MS = 35 * 86_400_000
