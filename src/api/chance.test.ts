import { expect, it } from 'vitest'
import { z } from 'zod'
import { newId } from './chance.ts'

it('makes version-4 UUIDs, a new one each time', () => {
  const ids = Array.from({ length: 200 }, () => newId())
  for (const id of ids) expect(z.uuidv4().safeParse(id).success).toBe(true)
  expect(new Set(ids).size).toBe(ids.length)
})
