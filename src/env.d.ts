/// <reference types="vite/client" />

// For tools that do not read components themselves; vue-tsc does, and knows each one's own type.
declare module '*.vue' {
  import type { DefineComponent } from 'vue'
  const component: DefineComponent
  export default component
}
