import { VueQueryPlugin } from '@tanstack/vue-query'
import { createPinia } from 'pinia'
import { createApp } from 'vue'
import App from './App.vue'
import './assets/base.css'
import { createTexts } from './locales/index.ts'
import { createAppRouter } from './router/index.ts'
import { usePreferences } from './stores/preferences.ts'

const app = createApp(App)
app.use(createPinia())
app.use(VueQueryPlugin)
const texts = createTexts(usePreferences().locale)
app.use(texts)
app.use(createAppRouter())
app.mount('#app')
