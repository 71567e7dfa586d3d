import { mkdirSync, readFileSync, writeFileSync } from 'node:fs'
import { randomBytes } from 'node:crypto'
import { resolve, join } from 'node:path'
import { z } from 'zod'

const unsetIfEmpty = (value: unknown) => (value === '' ? undefined : value)
const optionalText = z.preprocess(unsetIfEmpty, z.string().optional())
const port = (fallback: number) =>
  z.preprocess(unsetIfEmpty, z.coerce.number().int().min(0).max(65535).default(fallback))
const onOff = z.preprocess(unsetIfEmpty, z.enum(['on', 'off']).optional())

const Environment = z.object({
  PORT: port(8080),
  HOST: z.preprocess(unsetIfEmpty, z.string().default('127.0.0.1')),
  MQTT_PORT: port(1883),
  DATABASE_URL: z.preprocess(unsetIfEmpty, z.url({ protocol: /^postgres(ql)?$/ }).optional()),
  DATA_DIR: z.preprocess(unsetIfEmpty, z.string().default('.data')),
  PUBLIC_URL: z.preprocess(unsetIfEmpty, z.url({ protocol: /^https?$/ }).optional()),
  /** How many reverse proxies stand before the server. */
  TRUST_PROXY: z.preprocess(unsetIfEmpty, z.coerce.number().int().min(0).max(10).default(0)),
  DEMO: onOff,
  DEMO_SEED: z.preprocess(unsetIfEmpty, z.coerce.number().int().min(1).default(1)),
  /** For how many months readings are kept as sent; 0 keeps them for ever. */
  RETENTION_MONTHS: z.preprocess(unsetIfEmpty, z.coerce.number().int().min(0).max(1200).default(13)),
  LOG_LEVEL: z.preprocess(unsetIfEmpty, z.enum(['fatal', 'error', 'warn', 'info', 'debug']).default('info')),
  NODE_ENV: optionalText,
})

const Secrets = z.object({
  /** Signs access tokens. */
  tokenKey: z.string().min(43),
  /** Shown on the sign-in page of the demo house, and of no use elsewhere. */
  demoPassword: z.string().min(8),
})
export type Secrets = z.infer<typeof Secrets>

/** What the environment and `DATA_DIR` say, checked once at start and never changed after. */
export type Config = Readonly<{
  port: number
  host: string
  mqttPort: number
  /** Unset: PostgreSQL from Debian's package, started in `dataDir`. */
  databaseUrl: string | undefined
  dataDir: string
  publicUrl: string | undefined
  trustProxy: number
  /** `on` and `off` as asked for; unset: on when the database is new and this is not production. */
  demo: 'on' | 'off' | undefined
  demoSeed: number
  /** Months for which readings are kept as sent; 0 keeps them for ever. */
  retentionMonths: number
  production: boolean
  logLevel: z.infer<typeof Environment>['LOG_LEVEL']
  secrets: Readonly<Secrets>
}>

/** A setting that cannot be used, in words for the person who starts the server. */
export class ConfigError extends Error {}

/**
 * Reads the configuration: the only place that looks at the environment. Secrets are made on the first start and kept
 * in `DATA_DIR/secrets.json`, readable by the owner only.
 * @throws ConfigError naming every setting that is wrong
 */
export function readConfig(environment: NodeJS.ProcessEnv = process.env): Config {
  const parsed = Environment.safeParse(environment)
  if (!parsed.success) {
    const lines = parsed.error.issues.map((issue) => `${issue.path.join('.')}: ${issue.message}`)
    throw new ConfigError(`These settings cannot be used:\n  ${lines.join('\n  ')}`)
  }
  const settings = parsed.data
  const dataDir = resolve(settings.DATA_DIR)
  return Object.freeze({
    port: settings.PORT,
    host: settings.HOST,
    mqttPort: settings.MQTT_PORT,
    databaseUrl: settings.DATABASE_URL,
    dataDir,
    publicUrl: settings.PUBLIC_URL,
    trustProxy: settings.TRUST_PROXY,
    demo: settings.DEMO,
    demoSeed: settings.DEMO_SEED,
    retentionMonths: settings.RETENTION_MONTHS,
    production: settings.NODE_ENV === 'production',
    logLevel: settings.LOG_LEVEL,
    secrets: Object.freeze(readOrMakeSecrets(dataDir)),
  })
}

function readOrMakeSecrets(dataDir: string): Secrets {
  const file = join(dataDir, 'secrets.json')
  try {
    mkdirSync(dataDir, { recursive: true })
    // `wx`: of two first starts at once only one writes, and both read the same.
    writeFileSync(file, JSON.stringify(newSecrets(), null, 2), { flag: 'wx', mode: 0o600 })
  } catch (error) {
    if (!isFileExists(error)) {
      throw new ConfigError(
        `DATA_DIR ${dataDir} cannot be written: ${error instanceof Error ? error.message : String(error)}`,
      )
    }
  }
  try {
    return Secrets.parse(JSON.parse(readFileSync(file, 'utf8')))
  } catch {
    throw new ConfigError(`${file} is damaged. Put back a copy, or remove it: everyone then signs in anew.`)
  }
}

function newSecrets(): Secrets {
  return {
    tokenKey: randomBytes(48).toString('base64url'),
    demoPassword: `embers-${randomBytes(4).toString('hex')}`,
  }
}

function isFileExists(error: unknown): boolean {
  return error instanceof Error && 'code' in error && error.code === 'EEXIST'
}
