/**
 * Inverse polynomials of ITS-90 for type K (NIST Monograph 175), from memory: °C from mV, constant term first.
 * Each holds from the range before up to its `toMv`; their errors stay within 0.06 °C.
 */
const ranges = [
  {
    toMv: 0,
    terms: [
      0, 2.5173462e1, -1.1662878, -1.0833638, -8.977354e-1, -3.7342377e-1, -8.6632643e-2, -1.0450598e-2,
      -5.1920577e-4,
    ],
  },
  {
    toMv: 20.644,
    terms: [
      0, 2.508355e1, 7.860106e-2, -2.503131e-1, 8.31527e-2, -1.228034e-2, 9.804036e-4, -4.41303e-5,
      1.057734e-6, -1.052755e-8,
    ],
  },
  {
    toMv: 54.886,
    terms: [-1.318058e2, 4.830222e1, -1.646031, 5.464731e-2, -9.650715e-4, 8.802193e-6, -3.11081e-8],
  },
]

const lowestMv = -5.891

/**
 * The temperature of a type K thermocouple from its voltage, by the inverse polynomials of ITS-90. The voltage must
 * be referred to a cold junction at 0 °C: the device compensates for its own.
 *
 * @param volt in V (not mV)
 * @returns °C; undefined outside −200 to 1372 °C
 * @example celsiusFromThermocoupleK(0.004096) // 100.0
 */
export function celsiusFromThermocoupleK(volt: number): number | undefined {
  const mv = volt * 1000
  if (!(mv >= lowestMv)) return undefined
  const range = ranges.find(({ toMv }) => mv <= toMv)
  return range?.terms.reduceRight((sum, term) => sum * mv + term, 0)
}
