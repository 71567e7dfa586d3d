import { mkdirSync, writeFileSync } from 'node:fs'
import { join } from 'node:path'
import { parseArgs } from 'node:util'
import { seededRandom } from '#shared/domain/random.ts'
import { drawCook } from './generator/cook.ts'
import { drawKitchen } from './generator/kitchen.ts'
import { drawSimulatorKitchen } from './generator/simulator-kitchen.ts'
import { drawHouse, type PieceLaw } from './generator/house.ts'

/**
 * Writes the cooks of one imagined house in the back-test's form:
 * `node --import tsx tests/forecast/make-cooks.ts --seed 1 --history 100 --cooks 60 --out .cache/cooks/1`
 * gives `OUT/history` and `OUT/cooks`. Tuning uses seeds 1 to 999, figures come from 1000 to 1999.
 */
const { values } = parseArgs({
  options: {
    seed: { type: 'string', default: '1' },
    history: { type: 'string', default: '100' },
    cooks: { type: 'string', default: '60' },
    out: { type: 'string', default: '.cache/cooks/1' },
    /** Shares of the physics vapour, juice and front: `0.5,0.5,0`. Drawn when not given. */
    laws: { type: 'string' },
    /** `own` or `simulator`: whose physics. */
    physics: { type: 'string', default: 'own' },
  },
})

const seed = Number(values.seed)
const house = drawHouse(seededRandom('house', seed), lawShares(values.laws))
let index = 0
for (const [name, count] of [
  ['history', Number(values.history)],
  ['cooks', Number(values.cooks)],
] as const) {
  const folder = join(values.out, name)
  mkdirSync(folder, { recursive: true })
  const list = []
  for (let i = 0; i < count; i++) {
    const { csv, ...facts } = drawCook(
      house,
      seed,
      ++index,
      values.physics === 'simulator' ? drawSimulatorKitchen : drawKitchen,
    )
    writeFileSync(join(folder, `${facts.id}.csv`), csv)
    list.push(facts)
  }
  writeFileSync(join(folder, 'cooks.json'), JSON.stringify(list))
}

function lawShares(text: string | undefined): Record<PieceLaw, number> | undefined {
  if (text === undefined) return undefined
  const [vapour = 0, juice = 0, front = 0] = text.split(',').map(Number)
  return { vapour, juice, front }
}
