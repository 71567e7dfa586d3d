import { newId } from '@/api/chance.ts'
import { call } from '@/api/client.ts'
import { useForm } from '@/composables/useForm.ts'
import { NewPiece, pieceEndpoints, type Piece, type Recipe } from '@/shared/contract/piece.ts'

interface StartFields extends Record<string, unknown> {
  recipeId: number | null
  label: string
  rawKg: number | null
  cookerId: number | null
  position: string
  /** 0 for none. */
  channelId: number
  onAt: number | null
  /** 0 for none. */
  serviceId: number
}

/** The form that puts a piece on a cooker. Its event's id is made once, so that a second try starts no second piece. */
export function useStartForm(options: {
  site: string
  now: number
  serviceId: number
  onStarted: (piece: Piece) => void
}) {
  const eventId = newId()
  const form = useForm({
    initial: (): StartFields => ({
      ...{ recipeId: null, label: '', rawKg: null, cookerId: null, position: '', channelId: 0 },
      onAt: options.now,
      serviceId: options.serviceId,
    }),
    toInput: ({ recipeId, label, rawKg, cookerId, position, channelId, onAt, serviceId }) => ({
      ...{ eventId, recipeId, label, rawKg, cookerId },
      onAt: onAt === null ? null : new Date(onAt).toISOString(),
      ...(position.trim() === '' ? {} : { position }),
      ...(channelId === 0 ? {} : { channelId }),
      ...(serviceId === 0 ? {} : { serviceId }),
    }),
    schema: NewPiece,
    submit: async (body) => {
      const started = await call(pieceEndpoints.start, { params: { site: options.site }, body })
      options.onStarted(started)
    },
  })

  /** The recipe says what such a piece usually weighs; a weight that was entered stays. */
  function chooseRecipe(recipe: Recipe | undefined): void {
    form.values.recipeId = recipe?.id ?? null
    form.values.rawKg ??= recipe?.typicalKg ?? null
  }

  return { ...form, chooseRecipe }
}
