/**
 * Contrast of two opaque colours, 1 to 21, by the definition of WCAG 2.2 ("contrast ratio" and "relative
 * luminance"). Colours are `#rrggbb`; anything else is an error.
 */
export function contrast(one: string, other: string): number {
  const [lighter, darker] = [luminance(parseHex(one)), luminance(parseHex(other))].sort((a, b) => b - a)
  return ((lighter ?? 0) + 0.05) / ((darker ?? 0) + 0.05)
}

/** Lays a translucent `rgba(…)` over an opaque `#rrggbb` and gives the colour that is seen, as `#rrggbb`. */
export function layOver(over: string, under: string): string {
  const match = /^rgba\((\d+), (\d+), (\d+), ([\d.]+)\)$/.exec(over)
  if (match === null) throw new RangeError(`not an rgba() colour: ${over}`)
  const [red = 0, green = 0, blue = 0, alpha = 1] = match.slice(1).map(Number)
  const ground = parseHex(under)
  const seen = [red, green, blue].map((value, i) =>
    Math.round(value * alpha + (ground[i] ?? 0) * 255 * (1 - alpha)),
  )
  return `#${seen.map((value) => value.toString(16).padStart(2, '0')).join('')}`
}

function parseHex(colour: string): number[] {
  const match = /^#([0-9a-f]{2})([0-9a-f]{2})([0-9a-f]{2})$/.exec(colour)
  if (match === null) throw new RangeError(`not a #rrggbb colour: ${colour}`)
  return match.slice(1).map((pair) => Number.parseInt(pair, 16) / 255)
}

function luminance(channels: number[]): number {
  const [red = 0, green = 0, blue = 0] = channels.map((value) =>
    value <= 0.04045 ? value / 12.92 : ((value + 0.055) / 1.055) ** 2.4,
  )
  return 0.2126 * red + 0.7152 * green + 0.0722 * blue
}
