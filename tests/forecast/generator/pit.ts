import type { Random } from '#shared/domain/random.ts'
import type { PitHabit } from './house.ts'

/** A fire of the test generator, stepped once a minute. */
export interface TestPit {
  minute(setC: number): number
  openDoor(): void
}

/** A fire that wanders about its set, dips when the fuel runs low and when somebody opens the door. */
export function drawPit(random: Random, habit: PitHabit, setC: number): TestPit {
  const bias = habit.biasC + habit.biasSdC * random.normal()
  const warm = setC - (random.uniform() < 0.4 ? 40 * random.uniform() : 0)
  let base = warm
  let wander = habit.wanderSdC * random.normal()
  let dip = 0
  let dipTarget = 0
  let door = 0
  return {
    minute: (set) => {
      const keep = Math.exp(-60 / habit.wanderTauS)
      wander = keep * wander + habit.wanderSdC * Math.sqrt(1 - keep * keep) * random.normal()
      base += (set + bias - base) / 18
      if (random.uniform() < habit.dipsPerHour / 60) dipTarget = -15 - 25 * random.uniform()
      dip += (dipTarget - dip) / 12
      if (dipTarget < 0 && dip < 0.8 * dipTarget) dipTarget = 0
      if (random.uniform() < habit.doorsPerHour / 60) door = -20 - 30 * random.uniform()
      door *= 0.75
      return base + wander + dip + door + 0.4 * random.normal()
    },
    openDoor: () => {
      door = -25 - 30 * random.uniform()
    },
  }
}
