import { describe, expect, it } from 'vitest'
import { clockText } from './clock-text.ts'

describe('clockText', () => {
  it('reads a time as people write it', () => {
    expect(['23:50', '2350', '23.50', '9:05', '905', ' 00:00 '].map(clockText)).toEqual([
      '23:50',
      '23:50',
      '23:50',
      '09:05',
      '09:05',
      '00:00',
    ])
  })

  it('takes nothing that is not a time of the day', () => {
    expect(['', '24:00', '12:60', '7', 'noon', '1:2:3'].map(clockText)).toEqual(Array(6).fill(null))
  })
})
