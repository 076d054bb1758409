/**
 * SQLite: one file, write-ahead log, every commit on the disk before anybody is told. A fact and its outbox entries are one transaction, so a crash can
 * lose neither or both, never one.
 */
import { mkdirSync } from "node:fs";
import { dirname } from "node:path";
import Database from "better-sqlite3";
import type { Fact, FactBody } from "../incident/facts.ts";
import { incidentId } from "../incident/incident-id.ts";
import type { IncidentStore, OutboxEntry } from "./store.ts";

const SCHEMA_VERSION = 1;
const SCHEMA = `
  CREATE TABLE incidents (number INTEGER PRIMARY KEY AUTOINCREMENT, id TEXT UNIQUE, disturbance_id TEXT NOT NULL UNIQUE);
  CREATE TABLE facts (seq INTEGER PRIMARY KEY AUTOINCREMENT, incident_id TEXT NOT NULL, at_us INTEGER NOT NULL, body TEXT NOT NULL);
  CREATE INDEX facts_of_incident ON facts (incident_id, seq);
  CREATE TABLE outbox (
    seq INTEGER PRIMARY KEY AUTOINCREMENT, key TEXT NOT NULL UNIQUE, channel_id TEXT NOT NULL, incident_id TEXT NOT NULL, fact_seq INTEGER NOT NULL,
    state TEXT NOT NULL DEFAULT 'waiting' CHECK (state IN ('waiting', 'done', 'set aside')), tries INTEGER NOT NULL DEFAULT 0,
    not_before_us INTEGER NOT NULL DEFAULT 0, error TEXT
  );
  CREATE INDEX outbox_waiting ON outbox (channel_id, incident_id, seq) WHERE state = 'waiting';
`;

/** Waits in channel ?, and is the oldest of its incident that does. */
const HEAD_OF_INCIDENT = `o.channel_id = ? AND o.state = 'waiting'
  AND o.seq = (SELECT MIN(i.seq) FROM outbox i WHERE i.channel_id = o.channel_id AND i.incident_id = o.incident_id AND i.state = 'waiting')`;

export class StoreError extends Error {}

/** @param path  ":memory:" for tests */
export function openSqliteStore(path: string): IncidentStore {
  let db: Database.Database;
  try {
    if (path !== ":memory:") mkdirSync(dirname(path), { recursive: true });
    db = new Database(path);
    db.pragma("journal_mode = WAL");
    // The package's build defaults to NORMAL in WAL mode: a power cut could then lose the last commits.
    db.pragma("synchronous = FULL");
  } catch (cause) {
    throw new StoreError(
      `${path}: cannot be opened as the incident store: ${(cause as Error).message}. Choose another folder with --data, or see who holds the file`,
      { cause },
    );
  }
  const version = db.pragma("user_version", { simple: true }) as number;
  if (version > SCHEMA_VERSION) {
    db.close();
    throw new StoreError(
      `${path}: written by a newer version (schema ${version}, this program knows ${SCHEMA_VERSION}). Use that version, or another folder with --data`,
    );
  }
  if (version === 0) {
    db.transaction(() => {
      db.exec(SCHEMA);
      db.pragma(`user_version = ${SCHEMA_VERSION}`);
    })();
  }
  return new SqliteStore(db);
}

interface OutboxRow {
  seq: number;
  key: string;
  channel_id: string;
  incident_id: string;
  fact_seq: number;
  tries: number;
  not_before_us: number;
}

class SqliteStore implements IncidentStore {
  readonly #db: Database.Database;
  readonly #statements;

  constructor(db: Database.Database) {
    this.#db = db;
    this.#statements = {
      incident: db.prepare<[string], { id: string }>("SELECT id FROM incidents WHERE disturbance_id = ?"),
      create: db.prepare<[string]>("INSERT INTO incidents (disturbance_id) VALUES (?)"),
      name: db.prepare<[string, number | bigint]>("UPDATE incidents SET id = ? WHERE number = ?"),
      fact: db.prepare<[string, number, string]>("INSERT INTO facts (incident_id, at_us, body) VALUES (?, ?, ?)"),
      tell: db.prepare<[string, string, string, number | bigint]>(
        "INSERT INTO outbox (key, channel_id, incident_id, fact_seq) VALUES (?, ?, ?, ?)",
      ),
      facts: db.prepare<[string], { seq: number; at_us: number; body: string }>(
        "SELECT seq, at_us, body FROM facts WHERE incident_id = ? ORDER BY seq",
      ),
      newest: db.prepare<[number], { id: string }>("SELECT id FROM incidents ORDER BY number DESC LIMIT ?"),
      due: db.prepare<[string, number], OutboxRow>(
        `SELECT o.* FROM outbox o WHERE ${HEAD_OF_INCIDENT} AND o.not_before_us <= ? ORDER BY o.seq`,
      ),
      nextDue: db.prepare<[string], { us: number | null }>(
        `SELECT MIN(o.not_before_us) AS us FROM outbox o WHERE ${HEAD_OF_INCIDENT}`,
      ),
      done: db.prepare<[number]>("UPDATE outbox SET state = 'done', tries = tries + 1, error = NULL WHERE seq = ?"),
      failed: db.prepare<[string, number, number]>(
        "UPDATE outbox SET tries = tries + 1, error = ?, not_before_us = ? WHERE seq = ?",
      ),
      aside: db.prepare<[string, number]>("UPDATE outbox SET state = 'set aside', tries = tries + 1, error = ? WHERE seq = ?"),
      count: db.prepare<[string], { n: number }>("SELECT COUNT(*) AS n FROM outbox WHERE state = ?"),
    };
  }

  open(disturbanceId: string, body: FactBody, atUs: number, channelIds: readonly string[]): Fact {
    return this.#db.transaction(() => {
      const known = this.incidentOf(disturbanceId);
      if (known) return this.#write(known, body, atUs, channelIds);
      const { lastInsertRowid } = this.#statements.create.run(disturbanceId);
      const id = incidentId(Number(lastInsertRowid));
      this.#statements.name.run(id, lastInsertRowid);
      return this.#write(id, body, atUs, channelIds);
    })();
  }

  append(incident: string, body: FactBody, atUs: number, channelIds: readonly string[]): Fact {
    return this.#db.transaction(() => this.#write(incident, body, atUs, channelIds))();
  }

  #write(incident: string, body: FactBody, atUs: number, channelIds: readonly string[]): Fact {
    const seq = Number(this.#statements.fact.run(incident, atUs, JSON.stringify(body)).lastInsertRowid);
    for (const channelId of channelIds) this.#statements.tell.run(`${incident}/${seq}/${channelId}`, channelId, incident, seq);
    return { seq, incidentId: incident, atUs, body };
  }

  incidentOf(disturbanceId: string): string | undefined {
    return this.#statements.incident.get(disturbanceId)?.id;
  }
  facts(incident: string): Fact[] {
    return this.#statements.facts
      .all(incident)
      .map((row) => ({ seq: row.seq, incidentId: incident, atUs: row.at_us, body: JSON.parse(row.body) as FactBody }));
  }
  newest(limit: number): string[] {
    return this.#statements.newest.all(limit).map((row) => row.id);
  }
  due(channelId: string, nowUs: number): OutboxEntry[] {
    return this.#statements.due.all(channelId, nowUs).map((row) => ({
      seq: row.seq,
      key: row.key,
      channelId: row.channel_id,
      incidentId: row.incident_id,
      factSeq: row.fact_seq,
      tries: row.tries,
      notBeforeUs: row.not_before_us,
    }));
  }
  nextDueUs(channelId: string): number | undefined {
    return this.#statements.nextDue.get(channelId)!.us ?? undefined;
  }
  delivered(seq: number): void {
    this.#statements.done.run(seq);
  }
  failed(seq: number, error: string, notBeforeUs: number): void {
    this.#statements.failed.run(error, notBeforeUs, seq);
  }
  setAside(seq: number, error: string): void {
    this.#statements.aside.run(error, seq);
  }
  counts(): { waiting: number; setAside: number } {
    return { waiting: this.#statements.count.get("waiting")!.n, setAside: this.#statements.count.get("set aside")!.n };
  }
  close(): void {
    this.#db.close();
  }
}
