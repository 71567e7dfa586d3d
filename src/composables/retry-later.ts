import { pageRandom } from '@/api/chance.ts'
import { backoffMs } from '@/stores/live-backoff.ts'

/**
 * For parts whose code is fetched on its own (`onError` of Vue's `defineAsyncComponent`): asks again after a while,
 * without end, since a page on a wall has nobody to load it again.
 */
export function retryLater(_error: Error, retry: () => void, _fail: () => void, attempts: number): void {
  setTimeout(retry, backoffMs(attempts, pageRandom()))
}
