import packageJson from '../../package.json' with { type: 'json' };

/**
 * What computed a report: this package, Node and its JavaScript engine, whose `Math.exp` and
 * `Math.log` are part of the arithmetic. A report recomputed by the same engine has the same bytes.
 */
export function engineVersion(): string {
  const { node, v8 } = process.versions;
  return `fairturn ${packageJson.version}, node ${node}, v8 ${v8}`;
}
