import type { Palette } from '@/assets/tokens.ts'

/** Where a lane is drawn. */
export type LaneForm = 'wall' | 'desk' | 'phone' | 'cook'

/** Everything a lane's drawing needs to know of the look. Sizes in px. */
export interface ChartStyle {
  form: LaneForm
  palette: Palette
  fontFamily: string
  /** Times at the end of a fan. */
  time: number
  /** Names of pieces and what they are doing. */
  text: number
  /** Intervals, labels of rules and ticks. */
  small: number
  coreLine: number
  rule: number
  /** Half the side of an event's mark. */
  mark: number
  /** Height of the pit's ribbon. */
  ribbon: number
  /** Height of a rest or hold bar. */
  bar: number
  gap: number
  /** Whether flags, rows and values stand in the picture; on a phone they stand under it. */
  flags: boolean
  /** Whether temperatures and the pit's band are written at the left, as on the cook page. */
  scale: boolean
}

/** Sizes by form; on the wall nothing is under 28 px, see look.md's table of what is read from 4 m. */
const sizes: Record<LaneForm, Omit<ChartStyle, 'form' | 'palette' | 'fontFamily'>> = {
  wall: {
    ...{ time: 42, text: 34, small: 28, flags: true, scale: false },
    ...{ coreLine: 4, rule: 1.5, mark: 7, ribbon: 20, bar: 10, gap: 10 },
  },
  desk: {
    ...{ time: 18, text: 15, small: 13, flags: true, scale: false },
    ...{ coreLine: 2, rule: 1, mark: 4, ribbon: 14, bar: 6, gap: 6 },
  },
  phone: {
    ...{ time: 17, text: 15, small: 15, flags: false, scale: false },
    ...{ coreLine: 2, rule: 1, mark: 4, ribbon: 12, bar: 5, gap: 6 },
  },
  cook: {
    ...{ time: 20, text: 15, small: 13, flags: true, scale: true },
    ...{ coreLine: 2.5, rule: 1, mark: 5, ribbon: 72, bar: 8, gap: 8 },
  },
}

/** The style of a form in a theme's colours, larger or smaller by a factor. */
export function chartStyle(form: LaneForm, palette: Palette, fontFamily: string, scale = 1): ChartStyle {
  const { flags, scale: scaleShown, ...px } = sizes[form]
  return {
    form,
    palette,
    fontFamily,
    flags,
    scale: scaleShown,
    time: px.time * scale,
    text: px.text * scale,
    small: px.small * scale,
    coreLine: px.coreLine * scale,
    rule: Math.max(1, px.rule * scale),
    mark: px.mark * scale,
    ribbon: px.ribbon * scale,
    bar: px.bar * scale,
    gap: px.gap * scale,
  }
}
