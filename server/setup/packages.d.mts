/** Installs the lock file's packages when they are not installed already; returns a closing word. */
export function installPackages(root: string, say: (text: string) => void): Promise<string>

/** Whether `npm ci` is due in this repository. */
export function packagesAreStale(root: string): boolean
