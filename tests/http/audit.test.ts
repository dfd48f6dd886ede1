import { createPublicKey, verify } from 'node:crypto';
import postgres from 'postgres';
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import { startTestService, type TestService } from '../support/app.ts';

let service: TestService;
/** The tamperer: a second connection that may switch triggers off, as a database owner could. */
let tamperer: postgres.Sql;

beforeAll(async () => {
  service = await startTestService();
  tamperer = postgres(service.databaseUrl, { max: 1, onnotice: () => undefined });
});
afterAll(async () => {
  await tamperer.end();
  await service.close();
});

const CHAIN = 'administration';

async function checkpoint() {
  const answer = await service.as(service.administrator).post('/v1/audit/checkpoints');
  expect(answer.status).toBe(201);
  return { document: answer.body.document, signature: answer.body.signature };
}

async function verification(kept?: { document: string; signature: string }) {
  const body = kept === undefined ? {} : { checkpoint: kept };
  const answer = await service.as(service.administrator).post('/v1/audit/verifications', body);
  expect(answer.status).toBe(200);
  return answer.body;
}

/** Does something behind the triggers' back, looks what verification says, and undoes it. */
async function tampered(
  change: (tx: postgres.TransactionSql) => Promise<unknown>,
  kept?: { document: string; signature: string },
) {
  const copy = await tamperer`select * from audit_entries where chain = ${CHAIN} order by number`;
  const heads = await tamperer`select * from audit_chains`;
  await tamperer.begin(async (tx) => {
    await tx`set local session_replication_role = replica`;
    await change(tx);
  });
  const result = await verification(kept);
  await tamperer.begin(async (tx) => {
    await tx`set local session_replication_role = replica`;
    await tx`delete from audit_entries where chain = ${CHAIN}`;
    await tx`insert into audit_entries ${tx(copy)}`;
    await tx`delete from audit_chains`;
    await tx`insert into audit_chains ${tx(heads)}`;
  });
  return result;
}

describe('the audit log', () => {
  let lab = 0;
  beforeEach(async () => {
    for (let i = 0; i < 3; i += 1) {
      lab += 1;
      await service.as(service.administrator).post('/v1/labs', { name: `Lab ${lab}` });
    }
  });

  it('names the actor of every change and counts without a gap', async () => {
    const answer = await service.as(service.administrator).get(`/v1/audit/chains/${CHAIN}/entries`);
    const numbers = answer.body.items.map((entry: { number: number }) => entry.number);
    expect(numbers).toEqual(numbers.map((_: number, index: number) => index + 1));
    const last = JSON.parse(answer.body.items.at(-1).content);
    expect(last.action).toBe('lab-created');
    expect(last.actor.role).toBe('administrator');
    expect(last.actor.tokenId).toMatch(/^[0-9a-f-]{36}$/);
  });

  it('verifies when nothing was touched, also against a checkpoint', async () => {
    expect(await verification(await checkpoint())).toMatchObject({ intact: true, faults: [] });
  });

  it('signs checkpoints with the published Ed25519 key', async () => {
    const kept = await checkpoint();
    const { body } = await service.as(service.administrator).get('/v1/audit/public-key');
    const key = createPublicKey(body.publicKey);
    const signed = verify(
      null,
      Buffer.from(kept.document),
      key,
      Buffer.from(kept.signature, 'base64'),
    );
    expect(signed).toBe(true);
  });

  it('refuses update, delete and truncate through SQL', async () => {
    await expect(tamperer`update audit_entries set content = '{}'`).rejects.toThrow(/immutable/);
    await expect(tamperer`delete from audit_entries`).rejects.toThrow(/immutable/);
    await expect(tamperer`truncate audit_entries`).rejects.toThrow(/immutable/);
  });

  it('finds a changed entry', async () => {
    const result = await tampered(
      (tx) => tx`
        update audit_entries set content = replace(content, 'lab-created', 'lab-removed')
        where chain = ${CHAIN} and number = 3`,
    );
    expect(result.intact).toBe(false);
    expect(result.faults[0]).toMatchObject({ chain: CHAIN, number: 3, code: 'hash-mismatch' });
  });

  it('finds a deleted entry', async () => {
    const result = await tampered(
      (tx) => tx`delete from audit_entries where chain = ${CHAIN} and number = 3`,
    );
    expect(result.faults[0]).toMatchObject({ number: 3, code: 'gap' });
  });

  it('finds two entries that changed places', async () => {
    const result = await tampered(async (tx) => {
      await tx`update audit_entries set number = -2 where chain = ${CHAIN} and number = 2`;
      await tx`update audit_entries set number = 2 where chain = ${CHAIN} and number = 3`;
      await tx`update audit_entries set number = 3 where chain = ${CHAIN} and number = -2`;
    });
    expect(result.faults[0]).toMatchObject({ number: 2, code: 'link-mismatch' });
  });

  it('finds a changed time', async () => {
    const result = await tampered(
      (tx) => tx`
        update audit_entries set at = at - interval '1 day' where chain = ${CHAIN} and number = 2`,
    );
    expect(result.faults[0]).toMatchObject({ number: 2, code: 'time-mismatch' });
  });

  it('finds a cut-off end, and with a checkpoint also when the head was cut to fit', async () => {
    const kept = await checkpoint();
    const last = JSON.parse(kept.document).chains.find(
      (entry: { chain: string }) => entry.chain === CHAIN,
    ).number;
    const bare = await tampered(
      (tx) => tx`delete from audit_entries where chain = ${CHAIN} and number = ${last}`,
    );
    expect(bare.faults[0]).toMatchObject({ code: 'head-mismatch' });

    const cutToFit = async (tx: postgres.TransactionSql) => {
      await tx`delete from audit_entries where chain = ${CHAIN} and number = ${last}`;
      await tx`
        update audit_chains c set last_number = e.number, last_hash = e.hash
        from audit_entries e
        where e.chain = ${CHAIN} and e.number = ${last - 1} and c.chain = ${CHAIN}`;
    };
    // Without a checkpoint from outside a well-made cut leaves no trace: that is what it is for.
    expect((await tampered(cutToFit)).intact).toBe(true);
    const vouched = await tampered(cutToFit, kept);
    expect(vouched.faults[0]).toMatchObject({ number: last, code: 'checkpoint-missing-entry' });
  });

  it('finds a history that was written anew with valid hashes', async () => {
    const kept = await checkpoint();
    const result = await tampered(async (tx) => {
      const rows = await tx`
        select content, at from audit_entries where chain = ${CHAIN} order by number`;
      await tx`delete from audit_entries where chain = ${CHAIN}`;
      await tx`delete from audit_chains where chain = ${CHAIN}`;
      for (const row of rows) {
        const content = row.content.replace('"administrator"', '"study-lead"');
        await tx`select audit_append(${CHAIN}, ${content}, ${row.at})`;
      }
    }, kept);
    expect(result.faults[0]).toMatchObject({ code: 'checkpoint-mismatch' });
  });

  it('does not take a checkpoint that was signed by somebody else or altered', async () => {
    const kept = await checkpoint();
    const altered = { ...kept, document: kept.document.replace('"number":', '"number": ') };
    const result = await verification(altered);
    expect(result.faults[0]).toMatchObject({ code: 'checkpoint-signature' });
  });

  it('keeps one gapless chain when many append at once', async () => {
    const names = Array.from({ length: 20 }, (_, index) => `Lab at once ${index}`);
    const answers = await Promise.all(
      names.map((name) => service.as(service.administrator).post('/v1/labs', { name })),
    );
    expect(answers.map((answer) => answer.status)).toEqual(names.map(() => 201));
    expect(await verification()).toMatchObject({ intact: true });
  });
});
