import type { RequestHandler } from 'express'
import helmet from 'helmet'

/**
 * Security headers, with a content security policy that lets nothing in from elsewhere.
 * @param publicUrl where people reach this server; only over HTTPS do browsers take some of these headers
 */
export function securityHeaders(publicUrl: string | undefined): RequestHandler {
  const secure = publicUrl?.startsWith('https:') ?? false
  return helmet({
    contentSecurityPolicy: {
      // Named one by one: helmet's defaults include upgrade-insecure-requests, which breaks a house without HTTPS.
      useDefaults: false,
      directives: {
        defaultSrc: ["'self'"],
        scriptSrc: ["'self'"],
        // The component library writes its styles at run time.
        styleSrc: ["'self'", "'unsafe-inline'"],
        imgSrc: ["'self'", 'data:', 'blob:'],
        fontSrc: ["'self'"],
        // Older browsers do not count a WebSocket to the same host as 'self'.
        connectSrc: ["'self'", (request) => sameHostSocket(request.headers.host, secure)],
        workerSrc: ["'self'"],
        manifestSrc: ["'self'"],
        objectSrc: ["'none'"],
        baseUri: ["'self'"],
        formAction: ["'self'"],
        frameAncestors: ["'none'"],
      },
    },
    xFrameOptions: { action: 'deny' },
    referrerPolicy: { policy: 'no-referrer' },
    strictTransportSecurity: secure,
    // Over plain HTTP browsers ignore these two and complain of it in the console.
    crossOriginOpenerPolicy: secure,
    originAgentCluster: secure,
  })
}

/** The socket's address for a Host header that is one; nothing that could end the directive. */
function sameHostSocket(host: string | undefined, secure: boolean): string {
  const isHost = host !== undefined && /^[A-Za-z0-9.\-[\]:]+$/.test(host)
  return isHost ? `${secure ? 'wss' : 'ws'}://${host}` : "'self'"
}
