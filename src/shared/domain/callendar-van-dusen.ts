/** Coefficients of IEC 60751 for platinum, per °C, °C² and °C⁴. The last one is from memory; it acts below 0 °C only. */
const a = 3.9083e-3
const b = -5.775e-7
const c = -4.183e-12

/** Resistance of a Pt100 at 0 °C, in Ω. */
const atZero = 100

/** Where IEC 60751 gives the equation, in °C. */
const lowestC = -200
const highestC = 850

/**
 * The temperature of a Pt100 from its resistance, by the Callendar–Van Dusen equation of IEC 60751:
 * R = 100·(1 + A·t + B·t²) from 0 °C, below it with the term C·(t − 100)·t³. Above 0 °C solved in closed form,
 * below by Newton's method from there (three steps reach the last digit).
 *
 * @param ohm resistance in Ω
 * @returns °C; undefined outside −200 to 850 °C
 * @example celsiusFromPt100(138.505) // 100.00
 */
export function celsiusFromPt100(ohm: number): number | undefined {
  const ratio = ohm / atZero
  const discriminant = a * a - 4 * b * (1 - ratio)
  if (!(discriminant >= 0)) return undefined
  let celsius = (-a + Math.sqrt(discriminant)) / (2 * b)
  if (celsius < 0) {
    for (let step = 0; step < 4; step++) celsius -= (ratioAt(celsius) - ratio) / slopeAt(celsius)
  }
  return celsius >= lowestC && celsius <= highestC ? celsius : undefined
}

function ratioAt(t: number): number {
  return 1 + a * t + b * t * t + c * (t - 100) * t ** 3
}

function slopeAt(t: number): number {
  return a + 2 * b * t + c * (4 * t ** 3 - 300 * t * t)
}
