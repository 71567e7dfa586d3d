/** The two looks of the product: Night for walls and phones, Paper for the office and for print. */
export const themeNames = ['night', 'paper'] as const
export type ThemeName = (typeof themeNames)[number]

/**
 * The colours of one theme. Normal things are ink and grey; `amber` (needs a hand soon) and `red` (needs one now)
 * are kept for the abnormal and always come with a shape and a word. `link` is the one colour of controls and
 * never means a state. `hairline` is decoration: whatever must be seen as a line is drawn in `mark`.
 */
export interface Palette {
  ground: string
  raised: string
  hairline: string
  mark: string
  text: string
  quiet: string
  link: string
  linkHover: string
  linkPressed: string
  /** Text on a surface filled with `link`. */
  onLink: string
  amber: string
  red: string
  /** The forecast's 80 % band, laid over ground or raised. */
  fanOuter: string
  /** Its middle 50 %, laid over the outer band. */
  fanInner: string
  /** What lies under a pointer, laid over ground or raised. */
  hover: string
  /** A pressed or chosen row. */
  pressed: string
  /** Behind a dialog. */
  veil: string
}

export const palettes: Record<ThemeName, Palette> = {
  night: {
    ground: '#11171b',
    raised: '#1a2227',
    hairline: '#2f3a41',
    mark: '#7f8d95',
    text: '#e8ecee',
    quiet: '#a3b0b7',
    link: '#9cc4d8',
    linkHover: '#b7d6e5',
    linkPressed: '#86b2c8',
    onLink: '#11171b',
    amber: '#f0b24a',
    red: '#ff7a66',
    fanOuter: 'rgba(232, 236, 238, 0.14)',
    fanInner: 'rgba(232, 236, 238, 0.22)',
    hover: 'rgba(232, 236, 238, 0.06)',
    pressed: 'rgba(232, 236, 238, 0.11)',
    veil: 'rgba(4, 7, 9, 0.72)',
  },
  paper: {
    ground: '#f6f0e4',
    raised: '#fffaf0',
    hairline: '#d8ccb8',
    mark: '#857a6c',
    text: '#2a241e',
    quiet: '#5f564c',
    link: '#2f5f7a',
    linkHover: '#234b62',
    linkPressed: '#1a3a4d',
    onLink: '#fffaf0',
    amber: '#8a5a00',
    red: '#b3261e',
    fanOuter: 'rgba(42, 36, 30, 0.11)',
    fanInner: 'rgba(42, 36, 30, 0.18)',
    hover: 'rgba(42, 36, 30, 0.04)',
    pressed: 'rgba(42, 36, 30, 0.07)',
    veil: 'rgba(42, 36, 30, 0.45)',
  },
}

export const fontFamily = "'IBM Plex Sans', system-ui, sans-serif"
export const fontMono = "ui-monospace, 'Cascadia Mono', 'DejaVu Sans Mono', monospace"

/**
 * Type in px. `desk` for office screens, `phone` for one hand at night, `wall` for 4 m: there 53 px is what must
 * be read from 4 m (20 minutes of arc on a 55-inch 1080p screen), 42 px the rest, 28 px the smallest at all.
 */
export const type = {
  desk: { small: 13, body: 15, lead: 18, title: 24, figure: 32 },
  phone: { small: 15, body: 17, lead: 20, title: 24, figure: 34 },
  wall: { small: 28, body: 42, far: 53 },
} as const

/** Distances in px, in steps of four. */
export const space = { 1: 4, 2: 8, 3: 12, 4: 16, 5: 24, 6: 32, 7: 48 } as const

/** Corners in px: none on the wall, four elsewhere. */
export const corner = { wall: 0, control: 4 } as const

/** The least width and height of what a thumb must hit, in px. */
export const touchTarget = 48

/** Widths in px at which the layout changes: below `phone` one column, from `wide` the full timetable. */
export const breakpoints = { phone: 720, wide: 1100 } as const

/** The custom properties of a theme, as set on the root element: `--ground`, `--mark`, `--fan-outer` … */
export function cssVariables(theme: ThemeName): Record<string, string> {
  const variables: Record<string, string> = {}
  for (const [name, value] of Object.entries(palettes[theme])) {
    variables[`--${name.replace(/[A-Z]/g, (letter) => `-${letter.toLowerCase()}`)}`] = String(value)
  }
  return variables
}
