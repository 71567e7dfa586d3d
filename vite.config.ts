import { fileURLToPath } from 'node:url'
import vue from '@vitejs/plugin-vue'
import { defineConfig } from 'vite'

const server = 'http://127.0.0.1:8080'

export default defineConfig({
  plugins: [vue()],
  resolve: { alias: { '@': fileURLToPath(new URL('./src', import.meta.url)) } },
  define: {
    // vue-i18n: composition only, and no messages compiled with eval, which the page's security policy forbids.
    __VUE_I18N_LEGACY_API__: false,
    __VUE_I18N_FULL_INSTALL__: false,
    __INTLIFY_JIT_COMPILATION__: true,
    __INTLIFY_DROP_MESSAGE_COMPILER__: false,
    __INTLIFY_PROD_DEVTOOLS__: false,
  },
  build: {
    outDir: 'dist/client',
    // The wall's charts come as a piece of their own, loaded when a lane is shown.
    chunkSizeWarningLimit: 700,
  },
  server: {
    host: '127.0.0.1',
    proxy: { '/api': server, '/live': { target: server, ws: true } },
  },
})
