import {
  createRouter,
  createWebHistory,
  type RouteLocationRaw,
  type Router,
  type RouteRecordRaw,
} from 'vue-router'
import type { Action } from '@/shared/domain/permissions.ts'
import { useSession } from '@/stores/session.ts'
// Not loaded when first opened: it is shown when nothing can be loaded.
import NoServerView from '@/views/not-found/NoServerView.vue'
import { lastSite, rememberSite } from './last-site.ts'

declare module 'vue-router' {
  interface RouteMeta {
    /** Key of the page's title. */
    title?: string
    /** Open to people who are not signed in. */
    open?: boolean
    /** What a person must be allowed to do at the site of the address. */
    needs?: Action
  }
}

const routes: RouteRecordRaw[] = [
  {
    path: '/sign-in',
    name: 'sign-in',
    component: () => import('@/views/sign-in/SignInView.vue'),
    meta: { open: true, title: 'frame.title.signIn' },
  },
  { path: '/', name: 'home', component: () => import('@/views/not-found/NoSiteView.vue') },
  {
    path: '/:site/wall',
    name: 'wall',
    component: () => import('@/views/wall/WallView.vue'),
    props: { form: 'tv' },
    meta: { title: 'frame.title.wall', needs: 'site.view' },
  },
  {
    path: '/:site',
    component: () => import('@/components/layout/SiteFrame.vue'),
    children: [
      { path: '', redirect: (to) => ({ name: 'tonight', params: to.params }) },
      {
        path: 'tonight',
        name: 'tonight',
        component: () => import('@/views/wall/WallView.vue'),
        meta: { title: 'frame.title.tonight', needs: 'site.view' },
      },
      {
        path: 'pieces',
        name: 'pieces',
        component: () => import('@/views/pieces/PiecesView.vue'),
        meta: { title: 'frame.title.pieces', needs: 'history.view' },
      },
      {
        path: 'pieces/:pieceId(\\d+)',
        name: 'piece',
        component: () => import('@/views/cook/CookView.vue'),
        meta: { title: 'frame.title.piece', needs: 'history.view' },
      },
      {
        path: 'start',
        name: 'start',
        component: () => import('@/views/cook/StartPieceView.vue'),
        meta: { title: 'frame.title.start', needs: 'piece.start' },
      },
      {
        path: 'cookers',
        name: 'cookers',
        component: () => import('@/views/cookers/CookersView.vue'),
        meta: { title: 'frame.title.cookers', needs: 'site.view' },
      },
      {
        path: 'devices',
        name: 'devices',
        component: () => import('@/views/devices/DevicesView.vue'),
        meta: { title: 'frame.title.devices', needs: 'device.view' },
      },
      {
        path: 'server',
        name: 'server',
        component: () => import('@/views/server/ServerView.vue'),
        meta: { title: 'frame.title.server', needs: 'server.manage' },
      },
    ],
  },
  {
    path: '/no-server',
    name: 'no-server',
    component: NoServerView,
    meta: { open: true, title: 'frame.title.noServer' },
  },
  {
    path: '/:rest(.*)*',
    name: 'not-found',
    component: () => import('@/views/not-found/NotFoundView.vue'),
    meta: { open: true, title: 'frame.title.notFound' },
  },
]

/** The pages, loaded when first opened, with the guards that send people where they may be. */
export function createAppRouter(): Router {
  const router = createRouter({
    history: createWebHistory(),
    routes,
    scrollBehavior: (_to, _from, saved) => saved ?? { top: 0 },
  })
  router.beforeEach(async (to): Promise<RouteLocationRaw | boolean> => {
    const session = useSession()
    const away = await session.restore().then(
      () => false,
      () => true,
    )
    // Not "signed out": nobody could be asked. The address stays, and so does the way back to it.
    if (away && to.name !== 'no-server') {
      return { name: 'no-server', query: { to: to.fullPath }, replace: true }
    }
    if (to.name === 'sign-in' && session.signedIn) return '/'
    if (to.meta.open === true) return true
    if (!session.signedIn) return { name: 'sign-in', query: to.path === '/' ? {} : { to: to.fullPath } }
    const slugs = session.sites.map((site) => site.slug)
    const remembered = lastSite()
    const home = remembered !== null && slugs.includes(remembered) ? remembered : slugs[0]
    if (to.name === 'home') return home === undefined ? true : { name: 'tonight', params: { site: home } }
    const site = to.params['site']
    const allowed =
      typeof site === 'string' && (to.meta.needs === undefined || session.may(to.meta.needs, site))
    if (!allowed) return { name: 'not-found', params: { rest: to.path.split('/').slice(1) } }
    rememberSite(site)
    return true
  })
  return router
}
