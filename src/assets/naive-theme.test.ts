import { darkTheme, lightTheme } from 'naive-ui'
import { describe, expect, it } from 'vitest'
import { commonTokens } from './naive-theme.ts'
import { palettes, themeNames } from './tokens.ts'

describe.each(themeNames)('the %s theme of Naive UI', (name) => {
  it('gives every common token that Naive UI has', () => {
    const ours = Object.keys(commonTokens(palettes[name]))
    const theirs = [...Object.keys(lightTheme.common), ...Object.keys(darkTheme.common)]
    expect(theirs.length).toBeGreaterThan(100)
    expect(theirs.filter((token) => !ours.includes(token))).toEqual([])
  })
})
