import { pieceEndpoints } from '#shared/contract/piece.ts'
import type { Mount } from '../../http/mount.ts'
import type { RecipesService } from '../recipes/service.ts'
import type { PiecesService } from './service.ts'

export function pieceRoutes(
  mount: Mount,
  { pieces, recipes }: { pieces: PiecesService; recipes: RecipesService },
): void {
  mount(pieceEndpoints.recipes, async () => ({ items: await recipes.list() }))
  mount(pieceEndpoints.list, ({ site, query }) => pieces.list(site.id, query))
  mount(pieceEndpoints.start, ({ person, site, body }) => pieces.start({ person, site }, body))
  mount(pieceEndpoints.get, ({ params }) => pieces.get(params.pieceId))
  mount(pieceEndpoints.change, ({ person, site, params, version, body }) =>
    pieces.change({ person, site }, params.pieceId, version, body),
  )
  mount(pieceEndpoints.placeProbe, ({ person, site, params, body }) =>
    pieces.placeProbe({ person, site }, params.pieceId, body),
  )
}
