/**
 * Advance widths of IBM Plex Sans SemiBold in thousandths of its size, from space (32) to tilde (126), as measured
 * from the shipped font. Regular is never wider, so a box laid out with these holds either weight.
 */
const widths = [
  236, 309, 471, 713, 600, 960, 713, 260, 337, 337, 556, 600, 299, 402, 299, 437, 600, 600, 600, 600, 600,
  600, 600, 600, 600, 600, 319, 319, 600, 600, 600, 493, 899, 672, 663, 642, 689, 600, 577, 712, 719, 423,
  545, 678, 521, 817, 719, 712, 641, 712, 664, 611, 580, 689, 638, 949, 655, 632, 599, 329, 437, 329, 600,
  565, 600, 559, 600, 513, 600, 558, 350, 545, 588, 275, 275, 562, 294, 888, 588, 563, 600, 600, 393, 499,
  374, 588, 524, 819, 544, 524, 502, 363, 376, 363, 600,
]
const noBreakSpace = 160
const usual = 600

/** How wide a text is in px at a size in px: laid out without a canvas, so that layout can be tested. */
export function textWidth(text: string, sizePx: number): number {
  let thousandths = 0
  for (const character of text) {
    const code = character.codePointAt(0) ?? 0
    thousandths += widths[(code === noBreakSpace ? 32 : code) - 32] ?? usual
  }
  return (thousandths * sizePx) / 1000
}

/** The text, shortened with an ellipsis until it is no wider than `maxPx`. */
export function fitText(text: string, sizePx: number, maxPx: number): string {
  if (textWidth(text, sizePx) <= maxPx) return text
  const characters = Array.from(text)
  const shortened = () => `${characters.join('').trimEnd()}…`
  while (characters.length > 1 && textWidth(shortened(), sizePx) > maxPx) characters.pop()
  return shortened()
}
