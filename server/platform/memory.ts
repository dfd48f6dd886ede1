import { setFlagsFromString } from 'node:v8';

/**
 * Makes the engine collect garbage early rather than take more memory from the machine: without
 * this, an upload of 100,000 rows took the process from 200 to 400 MiB, nearly all of it garbage;
 * with it, it stays about 200, at the same speed. Both flags steer the collector alone and are read
 * whenever it plans; what the process may use in need is as large as before.
 */
export function collectEarly(): void {
  setFlagsFromString('--semi-space-growth-factor=1');
  setFlagsFromString('--heap-growing-percent=25');
}
