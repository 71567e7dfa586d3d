import type { CustomSeriesRenderItemReturn } from 'echarts'
import type { CustomSeriesOption } from 'echarts/charts'

export type XY = readonly [x: number, y: number]

/** What the parts of a lane are drawn with, in px. */
export type Shape =
  | { kind: 'polyline'; points: readonly XY[]; stroke: string; width: number; dash?: number[] }
  | { kind: 'polygon'; points: readonly XY[]; fill?: string; stroke?: string; width?: number }
  | {
      kind: 'rect'
      x: number
      y: number
      width: number
      height: number
      fill?: string
      stroke?: string
      line?: number
    }
  | { kind: 'circle'; x: number; y: number; radius: number; fill?: string; stroke?: string; line?: number }
  | TextShape

export interface TextShape {
  kind: 'text'
  /** Left end and middle of the line. */
  x: number
  y: number
  text: string
  size: number
  fill: string
  bold: boolean
  align?: 'left' | 'center' | 'right'
  /** A rim in the ground's colour that keeps the text readable over lines. */
  halo?: string
}

type Element = NonNullable<CustomSeriesRenderItemReturn>

/** A series that paints the shapes where they are, over (`z` higher) or under the others. */
export function shapeSeries(
  id: string,
  shapes: readonly Shape[],
  paint: { z: number; fontFamily: string },
): CustomSeriesOption {
  return {
    id,
    type: 'custom',
    coordinateSystem: 'none',
    silent: true,
    z: paint.z,
    // One datum carries all shapes; without shapes there is nothing to draw.
    data: shapes.length > 0 ? [0] : [],
    renderItem: () => ({ type: 'group', children: shapes.map((shape) => element(shape, paint.fontFamily)) }),
  }
}

function element(shape: Shape, fontFamily: string): Element {
  switch (shape.kind) {
    case 'polyline':
      return {
        type: 'polyline',
        shape: { points: mutable(shape.points) },
        style: {
          fill: 'none',
          stroke: shape.stroke,
          lineWidth: shape.width,
          lineJoin: 'round',
          ...(shape.dash === undefined ? {} : { lineDash: shape.dash }),
        },
      }
    case 'polygon':
      return {
        type: 'polygon',
        shape: { points: mutable(shape.points) },
        style: { fill: shape.fill ?? 'none', stroke: shape.stroke ?? 'none', lineWidth: shape.width ?? 0 },
      }
    case 'rect':
      return {
        type: 'rect',
        shape: { x: shape.x, y: shape.y, width: shape.width, height: shape.height },
        style: { fill: shape.fill ?? 'none', stroke: shape.stroke ?? 'none', lineWidth: shape.line ?? 0 },
      }
    case 'circle':
      return {
        type: 'circle',
        shape: { cx: shape.x, cy: shape.y, r: shape.radius },
        style: { fill: shape.fill ?? 'none', stroke: shape.stroke ?? 'none', lineWidth: shape.line ?? 0 },
      }
    case 'text':
      return {
        type: 'text',
        style: {
          text: shape.text,
          x: shape.x,
          y: shape.y,
          fill: shape.fill,
          font: `${shape.bold ? 600 : 400} ${shape.size}px ${fontFamily}`,
          align: shape.align ?? 'left',
          verticalAlign: 'middle',
          ...(shape.halo === undefined ? {} : { stroke: shape.halo, lineWidth: shape.size / 5 }),
        },
      }
  }
}

function mutable(points: readonly XY[]): number[][] {
  return points.map(([x, y]) => [x, y])
}
