/** Coefficients of the Steinhart–Hart equation, in 1/K; they belong to one make of thermistor. */
export interface SteinhartHart {
  a: number
  b: number
  c: number
}

const absoluteZeroC = -273.15

/**
 * The temperature of a thermistor from its resistance: 1/T = A + B·ln R + C·(ln R)³, T in kelvin
 * (I. S. Steinhart and S. R. Hart, Deep-Sea Research 15, 1968, 497–503).
 *
 * @param ohm resistance in Ω, above zero
 * @returns °C; undefined where the equation gives no temperature above absolute zero
 * @example celsiusFromThermistor(9814, { a: 1.10415912e-3, b: 2.38917947e-4, c: 6.93162653e-8 }) // 25.00
 */
export function celsiusFromThermistor(ohm: number, { a, b, c }: SteinhartHart): number | undefined {
  if (!(ohm > 0)) return undefined
  const log = Math.log(ohm)
  const perKelvin = a + b * log + c * log ** 3
  return perKelvin > 0 && Number.isFinite(perKelvin) ? 1 / perKelvin + absoluteZeroC : undefined
}
