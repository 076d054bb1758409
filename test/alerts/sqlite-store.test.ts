import { copyFileSync, existsSync, mkdtempSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import Database from "better-sqlite3";
import { afterAll, describe, expect, it } from "vitest";
import { openSqliteStore, StoreError } from "../../alerts/store/sqlite-store.ts";
import { located, noticed } from "./samples.ts";
import { storeContract } from "./store-contract.ts";

const folder = mkdtempSync(join(tmpdir(), "spanmark-store-"));
afterAll(() => rmSync(folder, { recursive: true }));
let files = 0;
const fresh = () => join(folder, `${++files}.sqlite`);

storeContract("SQLite in memory", () => openSqliteStore(":memory:"));
storeContract("SQLite in a file", () => openSqliteStore(fresh()));

describe("SQLite", () => {
  it("writes ahead, and waits for the disk at every commit", () => {
    // The pragma belongs to the connection: read it where the store sets it.
    const seen: unknown[] = [];
    const pragma = Database.prototype.pragma;
    Database.prototype.pragma = function (this: Database.Database, ...args: Parameters<typeof pragma>) {
      const result = pragma.apply(this, args);
      if (args[0].startsWith("synchronous"))
        seen.push(pragma.call(this, "synchronous", { simple: true }), pragma.call(this, "journal_mode", { simple: true }));
      return result;
    } as typeof pragma;
    try {
      openSqliteStore(fresh()).close();
    } finally {
      Database.prototype.pragma = pragma;
    }
    expect(seen).toEqual([2, "wal"]); // 2 is FULL
  });

  it("a fact whose outbox entry cannot be written is not written either", () => {
    const path = fresh();
    const store = openSqliteStore(path);
    const { incidentId } = store.open("a", noticed, 1, ["mail"]);
    expect(() => store.append(incidentId, located(), 2, ["mail", "mail"])).toThrow(/UNIQUE/);
    expect(store.facts(incidentId).length).toBe(1);
    expect(store.counts().waiting).toBe(1);
    store.close();
  });

  it("what was committed is there after a crash at any point: the files as they lay", () => {
    const path = fresh();
    const store = openSqliteStore(path);
    const states: { copy: string; facts: number }[] = [];
    const { incidentId } = store.open("a", noticed, 1, ["mail"]);
    for (let k = 0; k < 5; k++) {
      store.append(incidentId, located(), k, ["mail"]);
      const copy = fresh();
      copyFileSync(path, copy);
      if (existsSync(`${path}-wal`)) copyFileSync(`${path}-wal`, `${copy}-wal`);
      states.push({ copy, facts: k + 2 });
    }
    store.close();
    for (const { copy, facts } of states) {
      const again = openSqliteStore(copy);
      expect(again.facts(incidentId).length).toBe(facts);
      expect(again.counts().waiting).toBe(facts);
      expect(again.open("b", noticed, 9, []).incidentId).not.toBe(incidentId);
      again.close();
    }
  });

  it("refuses a path that cannot be used, in words", () => {
    const file = fresh();
    writeFileSync(file, "a file where a folder is needed");
    expect(() => openSqliteStore(join(file, "deeper", "incidents.sqlite"))).toThrow(StoreError);
    expect(() => openSqliteStore(join(file, "deeper", "incidents.sqlite"))).toThrow(/another folder with --data/);
    expect(() => openSqliteStore(folder)).toThrow(StoreError);
  });

  it("gives the same state when the file is opened again: facts, order, tries, what was set aside", () => {
    const path = fresh();
    const store = openSqliteStore(path);
    const { incidentId } = store.open("a", noticed, 1, ["mail", "chat"]);
    store.append(incidentId, located(), 2, ["mail", "chat"]);
    store.failed(store.due("mail", 0)[0]!.seq, "refused", 700);
    store.setAside(store.due("chat", 0)[0]!.seq, "gone");
    const all = (s: typeof store) => [s.facts(incidentId), s.due("mail", 699), s.due("mail", 700), s.due("chat", 0), s.counts()];
    const before = all(store);
    store.close();
    expect(() => store.append(incidentId, located(), 3, ["mail"])).toThrow(/not open/);
    const again = openSqliteStore(path);
    expect(all(again)).toEqual(before);
    expect(again.counts()).toEqual({ waiting: 3, setAside: 1 });
    again.close();
  });

  it("refuses a file of a newer version, and one that is no database, in words", () => {
    const newer = fresh();
    openSqliteStore(newer).close();
    const db = new Database(newer);
    db.pragma("user_version = 99");
    db.close();
    expect(() => openSqliteStore(newer)).toThrow(/written by a newer version \(schema 99, this program knows 1\)/);
    const text = fresh();
    writeFileSync(text, "this is no database, but long enough to be read as one".repeat(100));
    expect(() => openSqliteStore(text)).toThrow(StoreError);
    expect(() => openSqliteStore(text)).toThrow(/cannot be opened as the incident store/);
  });
});
