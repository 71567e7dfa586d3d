/**
 * The advisory lock between storing readings and rolling them up, as the arguments of `pg_advisory_xact_lock`.
 *
 * Whoever adds to `readings_1m` holds it shared from before its first row until its commit, and notes the quarters of
 * an hour it added to in `readings_due` in between. The roll-up holds it alone while it takes notes away. Without it
 * one that found a note there already, and so left none, could commit just after the roll-up had counted without it
 * and struck the note.
 */
export const rollUpLock = '7267, 15'
