import { expect, it } from 'vitest'
import { namedUuid } from './named-uuid.ts'

it('makes the id of RFC 9562, appendix A.4', () => {
  // Namespace DNS and "www.example.com"; the values are from memory of that appendix.
  expect(namedUuid('www.example.com', '6ba7b810-9dad-11d1-80b4-00c04fd430c8')).toBe(
    '2ed6657d-e927-568b-95e1-2665a8aea6a2',
  )
})

it('tells names apart', () => {
  expect(namedUuid('a')).toBe(namedUuid('a'))
  expect(namedUuid('a')).not.toBe(namedUuid('b'))
})
