import { z } from 'zod'

// The page's security policy allows no code made from text. Told so before the first schema is built, zod does not
// even try; the application is loaded afterwards, so that no order of bundled chunks can bring a schema forward.
z.config({ jitless: true })

const { mountPage } = await import('./mount-page.ts')
mountPage('#app')
