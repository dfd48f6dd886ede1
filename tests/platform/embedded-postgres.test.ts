import { spawn } from 'node:child_process';
import { mkdirSync, readdirSync, readFileSync, statSync, writeFileSync } from 'node:fs';
import { connect } from 'node:net';
import { networkInterfaces } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import postgres from 'postgres';
import { describe, expect, test } from 'vitest';
import {
  type EmbeddedPostgresOptions,
  startEmbeddedPostgres,
} from '#platform/embedded-postgres.ts';
import { FolderLockedError, processBirth } from '#platform/folder-lock.ts';
import { startNodeProgram } from '../support/node-program.ts';
import { temporaryFolder } from '../support/temporary-folder.ts';

const HOLDER = fileURLToPath(new URL('./hold-embedded-postgres.ts', import.meta.url));

function start(folder: string, more: Partial<EmbeddedPostgresOptions> = {}) {
  return startEmbeddedPostgres({ folder, log: () => undefined, durable: false, ...more });
}

async function query(url: string, text: string): Promise<postgres.RowList<postgres.Row[]>> {
  const sql = postgres(url, { max: 1, onnotice: () => undefined });
  try {
    return await sql.unsafe(text);
  } finally {
    await sql.end();
  }
}

/** A service in a process of its own, with one committed row. */
async function startHolder(folder: string) {
  const holder = startNodeProgram(HOLDER, { args: [folder] });
  const url = (await holder.line(/^url /)).slice('url '.length);
  await query(url, 'create table notes (text text)');
  await query(url, `insert into notes values ('kept')`);
  return { holder, url };
}

function serverPid(folder: string): number {
  return Number.parseInt(readFileSync(join(folder, 'postgres', 'postmaster.pid'), 'utf8'), 10);
}

async function kill(pid: number): Promise<void> {
  process.kill(pid, 'SIGKILL');
  while (processBirth(pid) !== null) await new Promise((settle) => setTimeout(settle, 10));
}

function connectionFault(host: string, port: number): Promise<string> {
  return new Promise((settle) => {
    const socket = connect({ host, port });
    socket.once('connect', () => {
      socket.destroy();
      settle('connected');
    });
    socket.once('error', (error: NodeJS.ErrnoException) => settle(error.code ?? 'unknown'));
  });
}

// common practice, no source: what an operator expects of a database that a service brings along
describe('embedded PostgreSQL', () => {
  test('keeps data and password between starts and leaves nothing running', async () => {
    const folder = join(temporaryFolder(), 'data');
    const first = await start(folder, { durable: true });
    expect(await query(first.url, 'show fsync')).toEqual([{ fsync: 'on' }]);
    expect(await query(first.url, 'show full_page_writes')).toEqual([{ full_page_writes: 'on' }]);
    expect(await query(first.url, 'show synchronous_commit')).toEqual([
      { synchronous_commit: 'on' },
    ]);
    await query(first.url, `create table notes as select 'kept' as text`);
    const pid = serverPid(folder);
    await first.stop();
    expect(processBirth(pid)).toBeNull();
    expect(await connectionFault('127.0.0.1', Number(new URL(first.url).port))).toBe(
      'ECONNREFUSED',
    );

    const second = await start(folder);
    expect(new URL(second.url).password).toBe(new URL(first.url).password);
    expect(await query(second.url, 'select text from notes')).toEqual([{ text: 'kept' }]);
    await second.stop();
    expect(readdirSync(folder).sort()).toEqual(['database-password', 'postgres']);
  });

  test('is reached on loopback only, with a password that only its owner reads', async () => {
    const folder = temporaryFolder();
    const server = await start(folder);
    try {
      const { port, password } = new URL(server.url);
      expect(password).toMatch(/^[0-9a-f]{48}$/);
      expect(statSync(join(folder, 'database-password')).mode & 0o777).toBe(0o600);
      expect(statSync(join(folder, 'postgres')).mode & 0o777).toBe(0o700);
      expect(await query(server.url, 'show unix_socket_directories')).toEqual([
        { unix_socket_directories: '' },
      ]);
      expect(await connectionFault('127.0.0.1', Number(port))).toBe('connected');
      const others = Object.values(networkInterfaces()).flatMap((addresses) =>
        (addresses ?? []).filter(({ address }) => address !== '127.0.0.1'),
      );
      for (const { address, family } of others) {
        if (family !== 'IPv4') continue;
        expect(await connectionFault(address, Number(port)), address).toBe('ECONNREFUSED');
      }
      // The kernel's own list of listeners names the address (proc_net(5)): 127.0.0.1, no other.
      if (process.platform === 'linux') {
        const wanted = `:${Number(port).toString(16).toUpperCase().padStart(4, '0')} `;
        const listeners = ['/proc/net/tcp', '/proc/net/tcp6'].flatMap((file) =>
          readFileSync(file, 'utf8')
            .split('\n')
            .map((line) => line.trim().split(/\s+/))
            .filter((fields) => `${fields[1]} `.endsWith(wanted) && fields[3] === '0A'),
        );
        expect(listeners.map((fields) => fields[1]?.split(':')[0])).toEqual(['0100007F']);
      }
      const wrong = server.url.replace(password, 'guess');
      await expect(query(wrong, 'select 1')).rejects.toMatchObject({ code: '28P01' });
    } finally {
      await server.stop();
    }
  });

  test('refuses a second server on the folder, naming folder and process', async () => {
    const folder = temporaryFolder();
    const { holder, url } = await startHolder(folder);
    try {
      const refusal = await start(folder).catch((error: unknown) => error);
      expect(refusal).toBeInstanceOf(FolderLockedError);
      expect(String(refusal)).toContain(folder);
      expect(String(refusal)).toContain(`process, number ${holder.pid}`);
      // The first goes on undisturbed.
      expect(await query(url, 'select text from notes')).toEqual([{ text: 'kept' }]);
    } finally {
      await kill(holder.pid);
      await (await start(folder)).stop();
    }
  });

  test('recovers from kill -9 of the service: the orphan is stopped first', async () => {
    const folder = temporaryFolder();
    const { holder, url } = await startHolder(folder);
    const orphan = serverPid(folder);
    await kill(holder.pid);
    expect(await query(url, 'select 1 as one')).toEqual([{ one: 1 }]);

    const next = await start(folder);
    expect(processBirth(orphan)).toBeNull();
    expect(serverPid(folder)).not.toBe(orphan);
    expect(await query(next.url, 'select text from notes')).toEqual([{ text: 'kept' }]);
    await next.stop();
  });

  test('recovers from kill -9 of service and database server together', async () => {
    const folder = temporaryFolder();
    const { holder } = await startHolder(folder);
    const server = serverPid(folder);
    await Promise.all([kill(holder.pid), kill(server)]);
    const next = await start(folder);
    expect(await query(next.url, 'select text from notes')).toEqual([{ text: 'kept' }]);
    await next.stop();
  });

  test('spares a program that got the process id of a dead server', async () => {
    const folder = temporaryFolder();
    await (await start(folder)).stop();
    const bystander = spawn('sleep', ['600'], { uid: statSync(join(folder, 'postgres')).uid });
    try {
      const pidFile = join(folder, 'postgres', 'postmaster.pid');
      writeFileSync(pidFile, `${bystander.pid}\n${join(folder, 'postgres')}\n1\n5432\n\n\n\n\n`);
      const server = await start(folder);
      expect(await query(server.url, 'select 1 as one')).toEqual([{ one: 1 }]);
      await server.stop();
      expect(bystander.exitCode).toBeNull();
      expect(bystander.signalCode).toBeNull();
    } finally {
      bystander.kill();
    }
  });

  test('starts over when it was killed while making the database', async () => {
    const folder = temporaryFolder();
    mkdirSync(join(folder, 'postgres-unfinished', 'base'), { recursive: true });
    writeFileSync(join(folder, 'postgres-unfinished', 'PG_VERSION'), '18\n');
    writeFileSync(join(folder, 'password-handover'), 'left over\n');
    writeFileSync(join(folder, 'database-password'), 'left over\n', { mode: 0o644 });
    const server = await start(folder);
    expect(await query(server.url, 'select 1 as one')).toEqual([{ one: 1 }]);
    await server.stop();
    expect(statSync(join(folder, 'database-password')).mode & 0o777).toBe(0o600);
    expect(readdirSync(folder).sort()).toEqual(['database-password', 'postgres']);
  });

  test('runs in a folder within a closed one, without opening that', async () => {
    const closed = temporaryFolder();
    expect(statSync(closed).mode & 0o077).toBe(0);
    const server = await start(join(closed, 'data'));
    try {
      expect(await query(server.url, 'select 1 as one')).toEqual([{ one: 1 }]);
    } finally {
      await server.stop();
    }
    expect(statSync(closed).mode & 0o077).toBe(0);
  });

  test('says so when the server ends by itself', async () => {
    const folder = temporaryFolder();
    const server = await start(folder);
    process.kill(serverPid(folder), 'SIGKILL');
    expect((await server.lost).message).toBe('The embedded PostgreSQL server ended on SIGKILL.');
    await server.stop();
  });

  test('says what PostgreSQL reported when the database cannot be opened', async () => {
    const folder = temporaryFolder();
    await (await start(folder)).stop();
    writeFileSync(join(folder, 'postgres', 'PG_VERSION'), '9.0\n');
    await expect(start(folder)).rejects.toThrow(/does not start on .*postgres: .*9\.0/);
    // The lock was given back: the message stays the same, not "in use".
    await expect(start(folder)).rejects.toThrow(/does not start on/);
  });
});
