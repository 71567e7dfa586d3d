/** A source of chance. Everything that draws is given one, so that the same seed gives the same data. */
export interface Random {
  /** Uniform in [0, 1). */
  uniform(): number
  /** Standard normal. */
  normal(): number
}

/**
 * A seeded generator: sfc32 (a 128-bit counter-based generator of the PractRand family, public domain),
 * seeded through splitmix32. Two numbers or strings with the same value give the same sequence.
 */
export function seededRandom(...seed: (number | string)[]): Random {
  let hash = 2166136261
  for (const character of seed.join('\u0000')) {
    hash = Math.imul(hash ^ (character.codePointAt(0) ?? 0), 16777619)
  }
  const next32 = () => {
    hash = (hash + 0x9e3779b9) | 0
    let mixed = hash ^ (hash >>> 16)
    mixed = Math.imul(mixed, 0x21f0aaad)
    mixed ^= mixed >>> 15
    mixed = Math.imul(mixed, 0x735a2d97)
    return (mixed ^ (mixed >>> 15)) | 0
  }
  let a = next32()
  let b = next32()
  let c = next32()
  let counter = 1
  const uniform = () => {
    const sum = (((a + b) | 0) + counter) | 0
    counter = (counter + 1) | 0
    a = b ^ (b >>> 9)
    b = (c + (c << 3)) | 0
    c = (c << 21) | (c >>> 11)
    c = (c + sum) | 0
    return (sum >>> 0) / 4294967296
  }
  for (let i = 0; i < 12; i++) uniform()
  let spare: number | undefined
  const normal = () => {
    if (spare !== undefined) {
      const value = spare
      spare = undefined
      return value
    }
    // Marsaglia's polar method: exact, no tail cut off.
    let u: number, v: number, s: number
    do {
      u = 2 * uniform() - 1
      v = 2 * uniform() - 1
      s = u * u + v * v
    } while (s >= 1 || s === 0)
    const factor = Math.sqrt((-2 * Math.log(s)) / s)
    spare = v * factor
    return u * factor
  }
  return { uniform, normal }
}
