import { computed, type ComputedRef } from 'vue'
import { useRoute } from 'vue-router'
import type { Action } from '@/shared/domain/permissions.ts'
import { useSession, type SiteMembership } from '@/stores/session.ts'

export interface CurrentSite {
  /** The slug in the address; empty on pages without a site. */
  readonly slug: ComputedRef<string>
  readonly name: ComputedRef<string>
  /** IANA name; the browser's own zone on pages without a site. */
  readonly timeZone: ComputedRef<string>
  readonly membership: ComputedRef<SiteMembership | undefined>
  /** Whether the person signed in may do this here. */
  may(action: Action): boolean
}

/** The site that the address names, as the person signed in may see it. */
export function useSite(): CurrentSite {
  const route = useRoute()
  const session = useSession()
  const slug = computed(() => (typeof route.params['site'] === 'string' ? route.params['site'] : ''))
  const membership = computed(() => session.sites.find((site) => site.slug === slug.value))
  return {
    slug,
    membership,
    name: computed(() => membership.value?.name ?? slug.value),
    timeZone: computed(() => membership.value?.timeZone ?? browserZone()),
    may: (action) => session.may(action, slug.value),
  }
}

function browserZone(): string {
  return new Intl.DateTimeFormat().resolvedOptions().timeZone
}
