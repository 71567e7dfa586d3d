import { seededRandom } from '#shared/domain/random.ts'

import type { CrewHabits } from './crew-habits.ts'
import { channelsOf, findSite } from './demo/house.ts'
import type { PlannedPiece } from './night-run.ts'
import { drawSlip } from './probe.ts'
import type { PieceFact } from './story.ts'

/** Whoever looks after one piece: asked once a minute what was done to it. */
export interface CrewHand {
  readonly done: boolean
  decide(atMs: number, coreC: number, massKg: number): PieceFact[]
}

/** Makes the hand for one piece. It knows the true core: what people read off is close enough to it. */
export function createCrewHand(options: {
  plan: PlannedPiece
  habits: CrewHabits
  seed: string
  onMs: number
}): CrewHand {
  const { plan, habits, seed, onMs } = options
  const { recipe, servesMs } = plan
  const random = seededRandom(seed, 'hand')
  const slip = drawSlip(seed, onMs)
  const reseatMs =
    slip && slip.fromMs + habits.reseatS * 1000 < slip.toMs ? slip.fromMs + habits.reseatS * 1000 : 0
  const sliceMs = servesMs - minutes(12 * random.uniform())
  const trimmedShare = random.uniform()
  const holdCooker = findSite(plan.identity.site).cookers.find(({ kind }) => kind === 'holding')?.name
  const canMove =
    plan.movesTo !== undefined && channelsOf(findSite(plan.identity.site), plan.movesTo, 'meat').length > 0
  let spritzed = 0
  const seen: Partial<
    Record<
      'on' | 'ripe' | 'wrap' | 'moved' | 'tender' | 'pull' | 'rest' | 'hold' | 'reseated' | 'sliced',
      number
    >
  > = {}
  let cookedKg = 0

  return {
    get done() {
      return seen.sliced !== undefined
    },
    decide(atMs, coreC, massKg) {
      const facts: PieceFact[] = []
      const log = (mark: keyof typeof seen, fact: PieceFact) => {
        seen[mark] = atMs
        facts.push(fact)
      }
      if (seen.on === undefined) {
        log('on', { kind: 'on', cooker: plan.cooker })
        facts.push({ kind: 'weighed', stage: 'trimmed', kg: hundredths(massKg) })
        return facts
      }
      if (seen.pull === undefined) onTheFire(atMs, coreC, log, facts)
      else afterwards(atMs, massKg, log, facts)
      return facts
    },
  }

  type Log = (mark: keyof typeof seen, fact: PieceFact) => void

  function onTheFire(atMs: number, coreC: number, log: Log, facts: PieceFact[]) {
    if (coreC >= recipe.wrapAtC) seen.ripe ??= atMs
    if (coreC >= recipe.pullAtC) seen.tender ??= atMs
    const spritz = habits.spritzS[spritzed]
    if (spritz !== undefined && seen.ripe === undefined && atMs >= onMs + spritz * 1000) {
      spritzed += 1
      facts.push({ kind: 'spritz' })
    }
    if (reseatMs > 0 && seen.reseated === undefined && atMs >= reseatMs)
      log('reseated', { kind: 'probe_reseated' })
    const { wrapMethod } = recipe
    if (seen.ripe !== undefined && seen.wrap === undefined && wrapMethod !== 'none') {
      if (atMs >= seen.ripe + habits.wrapDelayS * 1000) log('wrap', { kind: 'wrap', method: wrapMethod })
    }
    if (canMove && seen.moved === undefined && seen.wrap !== undefined && atMs >= seen.wrap + minutes(60)) {
      log('moved', { kind: 'moved', toCooker: plan.movesTo ?? plan.cooker })
    }
    if (seen.tender !== undefined && atMs >= seen.tender + habits.pullDelayS * 1000) {
      log('pull', { kind: 'pull', by: 'temperature' })
    } else if ((atMs >= servesMs - minutes(40) && coreC >= 89) || atMs >= servesMs + minutes(150)) {
      // The doors are about to open: what is nearly there comes off by feel, the last of it whatever it reads.
      log('pull', { kind: 'pull', by: 'feel' })
    }
  }

  function afterwards(atMs: number, massKg: number, log: Log, facts: PieceFact[]) {
    const pulledMs = seen.pull ?? atMs
    if (seen.rest === undefined) {
      if (atMs >= pulledMs + minutes(3)) log('rest', { kind: 'rest' })
      return
    }
    const restedMs = seen.rest + habits.restS * 1000
    if (seen.hold === undefined && atMs >= restedMs && atMs < sliceMs - minutes(15)) {
      log('hold', { kind: 'hold', cooker: holdCooker })
      return
    }
    if (atMs < sliceMs || atMs < seen.rest + minutes(25)) return
    if (cookedKg === 0) {
      cookedKg = hundredths(massKg)
      facts.push({ kind: 'weighed', stage: 'cooked', kg: cookedKg })
      return
    }
    log('sliced', { kind: 'sliced' })
    // The ends, the fat scraped off and what the board keeps.
    facts.push({ kind: 'weighed', stage: 'sliced', kg: hundredths(cookedKg * (0.88 + 0.08 * trimmedShare)) })
  }
}

function minutes(count: number): number {
  return Math.round(count) * 60_000
}

function hundredths(kg: number): number {
  return Math.round(kg * 100) / 100
}
