import { createConnection, type NetConnectOpts, type Socket } from 'node:net';
import { PrismaPg } from '@prisma/adapter-pg';
import postgres from 'postgres';
import { Prisma, PrismaClient } from './generated/prisma/client.ts';

/** A transaction of the records client (Prisma): access, studies, analyses, reports. */
export type RecordsTransaction = Prisma.TransactionClient;

/** A transaction of the SQL driver: arrivals, bulk upload, snapshots, audit reading. */
export type SqlTransaction = postgres.TransactionSql;

/** What both drivers can do alike; rows come back unparsed. */
export interface Executor {
  query(text: string, values: readonly SqlValue[]): Promise<unknown[]>;
}

export type SqlValue = string | number | boolean | null | Date | Uint8Array;

/**
 * The service's connections to PostgreSQL. Two drivers, one database: no transaction spans both, so
 * a service function picks one and everything it must do atomically goes through that one.
 */
export interface Database {
  readonly url: string;
  readonly records: PrismaClient;
  readonly sql: postgres.Sql;
  inRecordsTransaction<T>(work: (tx: RecordsTransaction) => Promise<T>): Promise<T>;
  inSqlTransaction<T>(work: (tx: SqlTransaction) => Promise<T>): Promise<T>;
  /** Reads as of one moment, whatever is committed meanwhile; refuses to write. */
  inReadingTransaction<T>(work: (tx: SqlTransaction) => Promise<T>): Promise<T>;
  /** Resolves when the database answers; rejects otherwise. */
  ping(): Promise<void>;
  close(): Promise<void>;
}

/** Tries of a transaction that PostgreSQL ended for serialisation or deadlock, before giving up. */
const TRANSACTION_TRIES = 5;

/** SQLSTATE 40001 serialization_failure and 40P01 deadlock_detected may be tried again. */
const RETRIED_STATES = new Set(['40001', '40P01']);

export function openDatabase(options: { url: string; poolSize: number }): Database {
  const sql = postgres(options.url, {
    max: options.poolSize,
    onnotice: () => undefined,
    ...promptSocket,
    types: {
      // Timestamps leave the database as Date, as Prisma gives them too.
      date: { to: 1184, from: [1082, 1114, 1184], serialize: dateText, parse: parseDate },
    },
  });
  const adapter = new PrismaPg({ connectionString: options.url, max: options.poolSize });
  const records = new PrismaClient({ adapter });
  return {
    url: options.url,
    records,
    sql,
    inRecordsTransaction: (work) =>
      retrying(() => records.$transaction(work, { maxWait: 30_000, timeout: 60_000 })),
    inSqlTransaction: (work) => retrying(() => inTransaction(sql, '', work)),
    inReadingTransaction: (work) =>
      retrying(() => inTransaction(sql, 'isolation level repeatable read read only', work)),
    ping: async () => {
      await sql`select 1`;
    },
    close: async () => {
      await Promise.all([sql.end({ timeout: 5 }), records.$disconnect()]);
    },
  };
}

/** The common face of a records transaction. */
export function recordsExecutor(tx: RecordsTransaction): Executor {
  return {
    query: (text, values) => tx.$queryRawUnsafe<unknown[]>(text, ...values),
  };
}

/** The common face of an SQL transaction. */
export function sqlExecutor(tx: SqlTransaction): Executor {
  return {
    query: async (text, values) => [...(await tx.unsafe(text, [...values]))],
  };
}

/** The driver's own type of what `begin` gives back unwraps arrays: the result is kept aside. */
async function inTransaction<T>(
  sql: postgres.Sql,
  mode: string,
  work: (tx: SqlTransaction) => Promise<T>,
): Promise<T> {
  let result: { value: T } | undefined;
  await sql.begin(mode, async (tx) => {
    result = { value: await work(tx) };
  });
  if (result === undefined) throw new Error('The transaction ended without a result.');
  return result.value;
}

async function retrying<T>(attempt: () => Promise<T>): Promise<T> {
  for (let tries = 1; ; tries += 1) {
    try {
      return await attempt();
    } catch (error) {
      if (tries >= TRANSACTION_TRIES || !RETRIED_STATES.has(sqlState(error) ?? '')) throw error;
      await new Promise((resolve) => setTimeout(resolve, 5 * 2 ** tries));
    }
  }
}

/** The SQLSTATE behind an error of either driver, or null. */
export function sqlState(error: unknown): string | null {
  if (error instanceof postgres.PostgresError) return error.code;
  if (error instanceof Prisma.PrismaClientKnownRequestError) {
    if (error.code === 'P2034') return '40001';
    if (error.code === 'P2002') return '23505';
    if (error.code === 'P2003') return '23503';
    const meta: unknown = error.meta?.code;
    return typeof meta === 'string' ? meta : null;
  }
  return null;
}

/**
 * The driver's own sockets hold back a small message while the one before is not acknowledged
 * (RFC 896), and the other side acknowledges late (RFC 1122 §4.2.3.2): 40 ms for each COPY and for
 * each query that is described first. These sockets do not wait.
 */
const promptSocket = {
  socket: async ({ host, port, path }: SocketPlaces): Promise<Socket> => {
    if (typeof path === 'string') return await connected({ path });
    let fault: unknown;
    for (const [index, one] of host.entries()) {
      try {
        return await connected({ host: one, port: Number(port[index]), noDelay: true });
      } catch (error) {
        fault = error;
      }
    }
    throw fault;
  },
};

/** Where the driver would connect to: hosts and ports side by side, or the path of a socket. */
interface SocketPlaces {
  readonly host: readonly string[];
  readonly port: readonly (string | number)[];
  readonly path?: string | false | undefined;
}

function connected(place: NetConnectOpts): Promise<Socket> {
  return new Promise((resolve, reject) => {
    const socket = createConnection(place);
    socket.once('error', reject);
    socket.once('connect', () => {
      socket.off('error', reject);
      resolve(socket);
    });
  });
}

function dateText(value: Date | string): string {
  return value instanceof Date ? value.toISOString() : value;
}

function parseDate(text: string): Date {
  return new Date(text);
}
