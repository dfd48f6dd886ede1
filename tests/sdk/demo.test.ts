import { execFile } from 'node:child_process';
import { createHash } from 'node:crypto';
import { readFileSync } from 'node:fs';
import path from 'node:path';
import { promisify } from 'node:util';
import { beforeAll, describe, expect, it } from 'vitest';

const top = path.resolve(import.meta.dirname, '../..');

let output = '';

beforeAll(async () => {
  const { stdout } = await promisify(execFile)('npm', ['run', '--silent', 'demo'], { cwd: top });
  output = stdout;
});

/** A line of the summary: estimate, interval, truth. */
const SUMMARY_LINE = /^(.+?) {2,}(-?[\d.]+) +(-?[\d.]+) to (-?[\d.]+) +(-?[\d.]+) +(?:yes|no)$/gm;

describe('npm run demo', () => {
  it('runs six stations at once, with what goes wrong in a study, to whole blocks', () => {
    for (const what of [
      'the same 12 trials sent again: 12 were there already',
      'the wrong liner is put on',
      'a time is mistyped as 400 s',
      '12 trials wait in the outbox until the link is back',
      '52 participants arrived, 48 completed every period',
      'Harbour: slots by sequence 4 4 4 4, completed 4 4 4 4',
      'Ridge: slots by sequence 4 4 4 4, completed 4 4 4 4',
      'Fen: slots by sequence 4 4 4 4, completed 4 4 4 4',
      'The report computed again has the same bytes',
      'All 48 slots, replayed from the revealed secret, agree',
      'The audit chains verify against the checkpoint',
    ]) {
      expect(output).toContain(what);
    }
    expect(output.match(/takes over slot/g)).toHaveLength(4);
  });

  it('estimates what is true in the simulated world', () => {
    const lines = [...output.matchAll(SUMMARY_LINE)];
    expect(lines).toHaveLength(15);
    for (const [, what, ...numbers] of lines) {
      const [estimate = 0, lower = 0, upper = 0, truth = 0] = numbers.map(Number);
      // Three half-widths are about six standard errors: chance alone, once in 10^8.
      expect(Math.abs(estimate - truth), what).toBeLessThan((3 * (upper - lower)) / 2);
    }
  });

  it('writes the report where its last line says, as it was hashed', () => {
    const lastLine = output.trimEnd().split('\n').at(-1) ?? '';
    const [, page = '', body = ''] = /: (\S+\.html) .* (\S+\.json) /.exec(lastLine) ?? [];
    const bytes = readFileSync(path.join(top, body));
    const sha256 = createHash('sha256').update(bytes).digest('hex');
    expect(output).toContain(`SHA-256 ${sha256.slice(0, 16)}…`);
    expect(readFileSync(path.join(top, page), 'utf8')).toContain('invented data');
    const flow = JSON.parse(bytes.toString()).result.participantFlow.overall;
    expect(flow).toMatchObject({ arrived: 52, completed: 48, withdrawn: 4, replaced: 4 });
    expect(flow.deviations).toMatchObject([{ kind: 'condition-presented-differs' }]);
  });
});
