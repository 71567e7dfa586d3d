import { QueryClient, VueQueryPlugin } from '@tanstack/vue-query'
import { createPinia } from 'pinia'
import { createApp, watch } from 'vue'
import App from './App.vue'
import './assets/base.css'
import { createTexts } from './locales/index.ts'
import { createAppRouter } from './router/index.ts'
import { useLiveStore } from './stores/live.ts'
import { usePreferences } from './stores/preferences.ts'
import { useSession } from './stores/session.ts'

/** Puts the application into the page. */
export function mountPage(selector: string): void {
  const app = createApp(App)
  const queryClient = new QueryClient()
  const router = createAppRouter()
  app.use(createPinia())
  app.use(VueQueryPlugin, { queryClient })
  app.use(createTexts(usePreferences().locale))
  app.use(router)

  const session = useSession()
  watch(
    () => session.signedIn,
    (signedIn) => {
      if (signedIn) return
      // Whoever signs in next on this device sees nothing of what the one before was shown.
      useLiveStore().stop()
      queryClient.clear()
      const { meta, fullPath } = router.currentRoute.value
      if (meta.open !== true) void router.push({ name: 'sign-in', query: { to: fullPath } })
    },
  )
  app.mount(selector)
}
