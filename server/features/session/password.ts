import { randomBytes } from 'node:crypto'
import { compare, hash } from 'bcryptjs'

/** Hashes and checks the passwords of people. Devices do not come here: theirs are random and many (see devices). */
export interface Passwords {
  hash(password: string): Promise<string>
  /** Takes as long without a stored hash as with one, so that the time does not tell which addresses are known. */
  matches(password: string, storedHash: string | undefined): Promise<boolean>
}

/**
 * bcrypt at a cost of 2^`cost` rounds: 10 takes about 120 ms here, which a person does not notice and a guesser does.
 * bcrypt looks at the first 72 bytes only.
 */
export function createPasswords(cost = 10): Passwords {
  const decoy = hash(randomBytes(24).toString('base64url'), cost)
  return {
    hash: (password) => hash(password, cost),
    matches: async (password, storedHash) => {
      const isSame = await compare(password, storedHash ?? (await decoy))
      return isSame && storedHash !== undefined
    },
  }
}
