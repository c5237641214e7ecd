import { readdir, readlink } from 'node:fs/promises';

const BY_ID = '/dev/serial/by-id';
const CLASS_TTY = '/sys/class/tty';
const MAX_LISTED = 16;

/**
 * Serial devices that are there now, stable names first: the links of /dev/serial/by-id, then those of
 * /sys/class/tty that a device stands behind (consoles and pseudo-terminals have none). Empty where neither exists.
 */
export async function listSerialPorts(): Promise<string[]> {
  const byId = (await namesIn(BY_ID)).map((name) => `${BY_ID}/${name}`);
  const others: string[] = [];
  for (const name of await namesIn(CLASS_TTY)) {
    const driver = await readlink(`${CLASS_TTY}/${name}/device/driver`).catch(() => null);
    // The kernel makes 8250 places for ports that no hardware stands behind.
    if (driver !== null && !driver.endsWith('/serial8250')) others.push(`/dev/${name}`);
  }
  return [...byId, ...others].slice(0, MAX_LISTED);
}

async function namesIn(folder: string): Promise<string[]> {
  return (await readdir(folder).catch(() => [])).sort();
}
