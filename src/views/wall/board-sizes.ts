import { type } from '@/assets/tokens.ts'

export interface BoardSizes {
  /** Factor on the wall's sizes: they are made for 1920 px. */
  scale: number
  leastLane: number
  axis: number
  tickGap: number
  variables: Record<string, string>
}

/** From this many lanes on the names of cookers are set smaller, so that figure and name fit a lane of 90 px. */
const manyLanes = 7

/** Sizes of the board: for 4 m on a wall (look.md's table, at 1920 px), or dense on a desk. */
export function boardSizes(form: 'wall' | 'desk', width: number, lanes: number): BoardSizes {
  if (form === 'desk') {
    return {
      scale: 1,
      leastLane: 96,
      axis: type.desk.small,
      tickGap: 64,
      variables: variablesOf({
        'head-width': 200,
        'lane-name': 16,
        'lane-figure': type.desk.title,
        'lane-state': type.desk.small,
        'lane-gap': 12,
        'gauge-width': 12,
        'gauge-height': 52,
        'next-time': type.desk.title,
        'next-what': type.desk.lead,
        'next-detail': type.desk.body,
        'next-pad': 14,
      }),
    }
  }
  const scale = width / 1920
  const { small, body, far } = type.wall
  return {
    scale,
    leastLane: 90 * scale,
    axis: small * scale,
    tickGap: 130 * scale,
    variables: variablesOf({
      'head-width': 400 * scale,
      'lane-name': (lanes >= manyLanes ? 34 : body) * scale,
      'lane-figure': far * scale,
      'lane-state': small * scale,
      'lane-gap': 16 * scale,
      'gauge-width': 24 * scale,
      'gauge-height': 72 * scale,
      'next-time': far * scale,
      'next-what': body * scale,
      'next-detail': small * scale,
      'next-pad': 12 * scale,
    }),
  }
}

function variablesOf(pixels: Record<string, number>): Record<string, string> {
  return Object.fromEntries(
    Object.entries(pixels).map(([name, px]) => [`--${name}`, `${Math.round(px * 10) / 10}px`]),
  )
}
