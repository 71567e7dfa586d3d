import { expect, it } from 'vitest'
import { ownPath } from './own-path.ts'

it.each(['/quarry-road/tonight', '/quarry-road/pieces?which=done', '/'])('keeps our own path %s', (path) => {
  expect(ownPath(path)).toBe(path)
})

it.each([
  '//elsewhere.example/',
  '/\\elsewhere.example',
  'https://elsewhere.example',
  'javascript:x',
  undefined,
  ['/a'],
])('takes the front page instead of %s', (path) => {
  expect(ownPath(path)).toBe('/')
})
