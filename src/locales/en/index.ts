import { chart } from './chart.ts'
import { cook } from './cook.ts'
import { cookers } from './cookers.ts'
import { devices } from './devices.ts'
import { errors } from './errors.ts'
import { format } from './format.ts'
import { frame } from './frame.ts'
import { pieces } from './pieces.ts'
import { server } from './server.ts'
import { signIn } from './sign-in.ts'
import { wall } from './wall.ts'
import { words } from './words.ts'

export const en = {
  chart,
  cook,
  cookers,
  devices,
  errors,
  format,
  frame,
  pieces,
  server,
  signIn,
  wall,
  words,
}
