import { fontFamily, palettes, type, type ThemeName } from './tokens.ts'

/**
 * The ECharts theme of one of our two looks: ink on ground, no palette of series colours (a line is named at its
 * end, never by a colour key), no animation.
 */
export function chartTheme(theme: ThemeName) {
  const { mark, text, quiet, hairline, raised } = palettes[theme]
  const label = { color: quiet, fontFamily, fontSize: type.desk.small }
  const axis = {
    axisLine: { lineStyle: { color: mark } },
    axisTick: { lineStyle: { color: mark } },
    axisLabel: label,
    splitLine: { lineStyle: { color: hairline } },
  }
  return {
    color: [text],
    backgroundColor: 'transparent',
    animation: false,
    textStyle: { fontFamily, color: text, fontSize: type.desk.body },
    title: { textStyle: { color: text, fontFamily } },
    timeAxis: axis,
    valueAxis: axis,
    categoryAxis: axis,
    line: { symbol: 'none', lineStyle: { width: 2 } },
    tooltip: {
      backgroundColor: raised,
      borderColor: mark,
      borderWidth: 1,
      textStyle: { color: text, fontFamily, fontSize: type.desk.body },
      extraCssText: 'border-radius: 4px; box-shadow: none',
    },
  }
}
