import type { CookerKind } from '#shared/domain/cooking.ts'

/** How a kind of pit behaves. Temperatures in K or °C, times in minutes. Shapes chosen after common practice. */
export interface PitKind {
  /** Standard deviation and period of the slow wander. */
  wanderC: number
  wanderMinutes: number
  /** The fire's own rhythm: feeding logs, a thermostat, a burner. */
  cycleC: number
  cycleMinutes: number
  /** Chance in an hour that the fuel runs low, how deep that goes and how long it falls. */
  dipsPerHour: number
  dipC: [least: number, most: number]
  dipMinutes: [least: number, most: number]
  /** Time constant of coming back after a dip or an open door, and of following a new set. */
  recoveryMinutes: number
  followMinutes: number
  /** Chance in an hour that somebody looks in, for how many seconds. */
  looksPerHour: number
  /** Share of the excess over outside air that an open door lets go in the end. */
  doorShare: number
  /** K per K of outside temperature away from 15 °C, and K per m/s of wind away from 3. */
  coldShare: number
  windShare: number
  /** kg/kg on top of the outside air's: water pans, burnt wood and gas, the meat's own. */
  moisture: number
  /** Convection on the meat, W/m²K. */
  film: number
}

export const pitKinds: Record<CookerKind, PitKind> = {
  offset: {
    wanderC: 4,
    wanderMinutes: 50,
    cycleC: 3.5,
    cycleMinutes: 42,
    dipsPerHour: 0.13,
    dipC: [8, 24],
    dipMinutes: [15, 40],
    recoveryMinutes: 14,
    followMinutes: 18,
    looksPerHour: 0.2,
    doorShare: 0.55,
    coldShare: 0.06,
    windShare: -0.6,
    moisture: 0.035,
    film: 10,
  },
  cabinet: {
    wanderC: 1.2,
    wanderMinutes: 90,
    cycleC: 2.2,
    cycleMinutes: 11,
    dipsPerHour: 0.015,
    dipC: [6, 15],
    dipMinutes: [10, 25],
    recoveryMinutes: 9,
    followMinutes: 12,
    looksPerHour: 0.12,
    doorShare: 0.6,
    coldShare: 0.02,
    windShare: 0,
    moisture: 0.06,
    film: 9,
  },
  rotisserie: {
    wanderC: 2.4,
    wanderMinutes: 60,
    cycleC: 3,
    cycleMinutes: 17,
    dipsPerHour: 0.05,
    dipC: [6, 18],
    dipMinutes: [12, 30],
    recoveryMinutes: 11,
    followMinutes: 15,
    looksPerHour: 0.18,
    doorShare: 0.5,
    coldShare: 0.02,
    windShare: -0.2,
    moisture: 0.05,
    film: 10.5,
  },
  kettle: {
    wanderC: 4.5,
    wanderMinutes: 75,
    cycleC: 2,
    cycleMinutes: 60,
    dipsPerHour: 0.16,
    dipC: [8, 22],
    dipMinutes: [25, 60],
    recoveryMinutes: 20,
    followMinutes: 25,
    looksPerHour: 0.25,
    doorShare: 0.7,
    coldShare: 0.08,
    windShare: -0.9,
    moisture: 0.04,
    film: 9,
  },
  holding: {
    wanderC: 0.4,
    wanderMinutes: 120,
    cycleC: 0.9,
    cycleMinutes: 7,
    dipsPerHour: 0,
    dipC: [0, 0],
    dipMinutes: [1, 1],
    recoveryMinutes: 8,
    followMinutes: 15,
    looksPerHour: 0.3,
    doorShare: 0.35,
    coldShare: 0,
    windShare: 0,
    moisture: 0.09,
    film: 6,
  },
}
